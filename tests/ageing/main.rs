//! The ageing model: how honest u, best and calibrate-by are on electrodes whose truth is known; its laws; other people's arithmetic.

mod laws;
mod outsiders;
mod proration;
mod reference;
mod study;
mod support;
