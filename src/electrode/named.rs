//! # Names that people type: one word, one thing, in config, CLI, events and JSON

/// Declares an enum whose variants have one spelled name each, for `FromStr`, `Display` and serde alike.
macro_rules! named {
    ($(#[$doc:meta])* $name:ident, $what:literal { $($(#[$vdoc:meta])* $variant:ident = $text:literal),+ $(,)? }) => {
        $(#[$doc])*
        #[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, serde::Serialize, serde::Deserialize)]
        pub enum $name {
            $($(#[$vdoc])* #[serde(rename = $text)] $variant),+
        }

        impl $name {
            /// Every one, in order.
            pub const ALL: &'static [Self] = &[$(Self::$variant),+];

            /// The name as typed and stored.
            pub const fn name(self) -> &'static str {
                match self { $(Self::$variant => $text),+ }
            }
        }

        impl std::fmt::Display for $name {
            fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
                f.pad(self.name())
            }
        }

        impl std::str::FromStr for $name {
            type Err = $crate::electrode::named::UnknownName;
            fn from_str(text: &str) -> Result<Self, Self::Err> {
                Self::ALL.iter().copied().find(|known| known.name() == text).ok_or_else(|| {
                    $crate::electrode::named::UnknownName {
                        what: $what,
                        given: text.to_owned(),
                        known: Self::ALL.iter().map(|known| known.name()).collect(),
                    }
                })
            }
        }
    };
}
pub(crate) use named;

/// A word that names nothing of its kind.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error("unknown {what} `{given}`; known are {}", known.join(", "))]
pub struct UnknownName {
    /// What was looked for, e.g. "buffer".
    pub what: &'static str,
    /// The word as given.
    pub given: String,
    /// Every word that would do.
    pub known: Vec<&'static str>,
}
