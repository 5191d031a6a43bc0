//! # Listening to an unknown meter: is it silent, is the rate wrong, and if neither, which of its figures is which
//!
//! in: what was heard at one rate. out: a [`rate::Heard`], a [`guess::Guess`], and from it a block of configuration.
//! Always: 1. Where the evidence does not part two columns, nothing is guessed. 2. What is proposed reads every line it was made from
//! to the very figures that stand in them. Not here: the port and the waiting (`cli/listen.rs`).

mod beside;
pub mod bus;
pub mod guess;
mod pattern;
pub mod propose;
pub mod rate;
mod shape;
mod token;
mod words;
