//! # Which units are on a Modbus bus, found by reading only
//!
//! Functions 3 and 4 alone are ever sent: they change nothing in a unit.

use super::super::frame::{Answer, find, request};
use crate::config::site::Table;

/// Registers looked at in each unit that answers.
pub const LOOKED_AT: u16 = 10;

/// What a unit answered to one read of one register.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Reply {
    /// The register's bits.
    Register(u16),
    /// It is there and refuses, by this code.
    Exception(u8),
}

/// The question for one register.
pub fn question(unit: u8, table: Table, address: u16) -> Vec<u8> {
    request(unit, table, address, 1)
}

/// The answer to that question in what was heard since, behind noise or an echo; its CRC is right and nothing else could have said it.
pub fn reply(heard: &[u8], unit: u8, table: Table) -> Option<Reply> {
    find(heard, unit, table, 1).and_then(|(_, answer)| match answer {
        Answer::Registers(words) => words.first().copied().map(Reply::Register),
        Answer::Exception(code) => Some(Reply::Exception(code)),
    })
}
