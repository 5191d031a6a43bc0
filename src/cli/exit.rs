//! # The four exit codes, and the only place that knows them

use std::process::ExitCode;

/// How a command ended.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Exit {
    /// Done.
    Done,
    /// The answer is "no": a verification failed, a calibration was rejected, an audit found a break, import rows were broken.
    No,
    /// The request was wrong.
    Request,
    /// The world failed: port, disk, database.
    World,
}

impl Exit {
    /// The number the shell sees.
    pub(super) const fn code(self) -> u8 {
        match self {
            Self::Done => 0,
            Self::No => 1,
            Self::Request => 2,
            Self::World => 3,
        }
    }
}

impl From<Exit> for ExitCode {
    fn from(exit: Exit) -> Self {
        Self::from(exit.code())
    }
}

/// What the argument parser's answer means: asked for help or version is done, anything else is a wrong request.
impl From<&clap::Error> for Exit {
    fn from(answer: &clap::Error) -> Self {
        if answer.use_stderr() {
            Self::Request
        } else {
            Self::Done
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use clap::error::ErrorKind;

    #[test]
    fn the_codes_are_the_contracts_four() {
        let codes = [Exit::Done, Exit::No, Exit::Request, Exit::World].map(Exit::code);
        assert_eq!(codes, [0, 1, 2, 3]);
    }

    #[test]
    fn help_and_version_are_done_and_a_typing_error_is_a_wrong_request() {
        for kind in [ErrorKind::DisplayHelp, ErrorKind::DisplayVersion] {
            assert_eq!(Exit::from(&clap::Error::new(kind)), Exit::Done, "{kind:?}");
        }
        for kind in [
            ErrorKind::UnknownArgument,
            ErrorKind::MissingRequiredArgument,
            ErrorKind::DisplayHelpOnMissingArgumentOrSubcommand,
        ] {
            assert_eq!(
                Exit::from(&clap::Error::new(kind)),
                Exit::Request,
                "{kind:?}"
            );
        }
    }
}
