//! # Simulation: electrodes, liquids and meters whose truth is known, for the demo and the tests
//!
//! in: a seed and a time. out: what meters would have shown, what technicians would have entered, and live meters behind
//! real pseudo-terminals that any program can open as serial lines.
//! Always: what a meter shows is a function of the time alone, so history and live readings join without a seam.
//! Not here: importing the history, entering the events, reading the lines: the demo does it as for a real site.

pub mod ageing;
pub mod electrode;
pub mod liquid;
pub mod logbook;
pub mod meter;
pub mod random;
pub mod site;
pub mod talk;
