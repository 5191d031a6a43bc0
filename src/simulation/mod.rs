//! # Simulated electrodes and meters behind pseudo-terminals, for the demo and the tests

pub mod ageing;
