//! # What a meter said at one moment

/// One figure of a meter.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Figure {
    /// A number, scaled to the signal's unit.
    Number(f64),
    /// The meter said that it is over range.
    OverRange,
}

/// What one meter said at one moment: one entry per signal of [`Meter::signals`](crate::config::site::Meter), `None` where this message did not carry it.
#[derive(Debug, Clone, PartialEq)]
pub struct Sample {
    /// Index into [`Site::meters`](crate::config::site::Site).
    pub meter: usize,
    /// The figures.
    pub figures: Vec<Option<Figure>>,
    /// The time the meter printed beside them, as it stood there.
    pub own_time: Option<String>,
}
