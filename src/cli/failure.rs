//! # What people read when a command cannot do what was asked: what, where, do

use super::exit::Exit;
use std::error::Error;
use std::fmt;
use std::io;

/// Why a command ended without doing all that was asked.
#[derive(Debug)]
pub(super) enum Failure {
    /// Whoever read our output has had enough (`halfcell … | head`): done, quietly.
    ReaderGone,
    /// Something to tell.
    Told {
        /// Decides the code.
        exit: Exit,
        /// Pictures of the places, printed before everything else.
        shown: Option<String>,
        /// What, with figures.
        what: String,
        /// Where it happened.
        place: Option<String>,
        /// What to do, as an order to the reader.
        remedy: Option<String>,
    },
}

impl Failure {
    /// The request was wrong; nothing was written.
    pub(super) fn request(what: impl Into<String>) -> Self {
        Self::told(Exit::Request, what.into())
    }

    /// The world failed.
    pub(super) fn world(what: impl Into<String>) -> Self {
        Self::told(Exit::World, what.into())
    }

    /// The answer is "no".
    pub(super) fn no(what: impl Into<String>) -> Self {
        Self::told(Exit::No, what.into())
    }

    fn told(exit: Exit, what: String) -> Self {
        Self::Told {
            exit,
            shown: None,
            what,
            place: None,
            remedy: None,
        }
    }

    /// Says where.
    #[must_use]
    pub(super) fn at(mut self, place_is: impl Into<String>) -> Self {
        if let Self::Told { place, .. } = &mut self {
            *place = Some(place_is.into());
        }
        self
    }

    /// Says what to do.
    #[must_use]
    pub(super) fn remedy(mut self, order: impl Into<String>) -> Self {
        if let Self::Told { remedy, .. } = &mut self {
            *remedy = Some(order.into());
        }
        self
    }

    /// Shows the places at fault before everything else.
    #[must_use]
    pub(super) fn shown(mut self, pictures: impl Into<String>) -> Self {
        if let Self::Told { shown, .. } = &mut self {
            *shown = Some(pictures.into());
        }
        self
    }

    /// The pictures to print first.
    pub(super) fn pictures(&self) -> Option<&str> {
        match self {
            Self::ReaderGone => None,
            Self::Told { shown, .. } => shown.as_deref(),
        }
    }

    /// Standard output could not be written.
    pub(super) fn output(error: &io::Error) -> Self {
        if error.kind() == io::ErrorKind::BrokenPipe {
            Self::ReaderGone
        } else {
            Self::world(format!("cannot write the output: {error}"))
        }
    }

    /// The code this ends with.
    pub(super) const fn exit(&self) -> Exit {
        match self {
            Self::ReaderGone => Exit::Done,
            Self::Told { exit, .. } => *exit,
        }
    }
}

/// What and where and what to do, without the word in front: the caller colours that.
impl fmt::Display for Failure {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let Self::Told {
            what,
            place,
            remedy,
            ..
        } = self
        else {
            return f.write_str("whoever read the output has gone");
        };
        f.write_str(what)?;
        if let Some(place) = place {
            write!(f, "\n  where: {place}")?;
        }
        if let Some(remedy) = remedy {
            write!(f, "\n  do:    {remedy}")?;
        }
        Ok(())
    }
}

impl Error for Failure {}

pub(super) use crate::daemon::chain;

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_failure_says_what_where_and_what_to_do() {
        let failure = Failure::request("no probe `P-9`")
            .at("/tmp/x.db")
            .remedy("add it with `halfcell probe add P-9 --kind ph`");
        assert_eq!(
            failure.to_string(),
            "no probe `P-9`\n  where: /tmp/x.db\n  do:    add it with `halfcell probe add P-9 --kind ph`"
        );
        assert_eq!(failure.exit(), Exit::Request);
    }

    #[test]
    fn a_reader_that_has_gone_is_no_failure_and_a_full_disk_is_one() {
        let gone = Failure::output(&io::Error::from(io::ErrorKind::BrokenPipe));
        assert_eq!(gone.exit(), Exit::Done);
        let full = Failure::output(&io::Error::from(io::ErrorKind::StorageFull));
        assert_eq!(full.exit(), Exit::World);
    }
}
