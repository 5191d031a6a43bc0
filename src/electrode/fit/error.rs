//! # Why no line can be drawn

/// Why no line can be drawn.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum FitError {
    /// Nothing was read.
    #[error("there is no reading to fit")]
    NoReadings,
    /// A figure that cannot be one.
    #[error("`{name}`: {what} {figure} cannot be used")]
    NotAFigure {
        /// The buffer.
        name: String,
        /// Which figure.
        what: &'static str,
        /// What it was.
        figure: f64,
    },
    /// The buffers do not span enough.
    #[error("buffers `{first}` and `{second}` are {apart:.2} pH apart, less than {limit} pH")]
    BuffersTooClose {
        /// The lowest.
        first: String,
        /// The highest.
        second: String,
        /// Their distance, pH.
        apart: f64,
        /// The least distance, pH.
        limit: f64,
    },
    /// A reading beyond what glass or metal can give.
    #[error("`{name}`: {mv} mV is beyond ±{limit} mV, the input is open or saturated")]
    Saturated {
        /// The buffer.
        name: String,
        /// The reading, mV.
        mv: f64,
        /// The limit, mV.
        limit: f64,
    },
    /// The same potential in different buffers.
    #[error("{mv} mV in every buffer from `{first}` to `{second}`, which are {apart:.2} pH apart")]
    NoResponse {
        /// One buffer.
        first: String,
        /// Another.
        second: String,
        /// Their distance, pH.
        apart: f64,
        /// The potential, mV.
        mv: f64,
    },
}

impl FitError {
    /// What to do about it.
    pub fn remedy(&self) -> String {
        match self {
            Self::NoReadings => "take a reading in a buffer; two buffers give offset and slope".to_owned(),
            Self::NotAFigure { name, what, .. } => format!("enter the {what} of `{name}` again"),
            Self::BuffersTooClose { limit, .. } => format!(
                "take buffers at least {limit} pH apart that bracket the liquid, or one of them alone to set the offset"
            ),
            Self::Saturated { .. } => "check plug, cable and wetting of the probe, then read the buffer again".to_owned(),
            Self::NoResponse { .. } => {
                "make sure that the bottles differ; then look for broken glass, a wet plug or a shorted cable, and replace the probe".to_owned()
            }
        }
    }
}
