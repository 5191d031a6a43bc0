//! # The units of a Modbus bus, found by reading

use super::ear::{Ear, framing, read_until};
use super::{framing_text, say};
use crate::cli::failure::Failure;
use crate::config::site::{Framing, Parity, Table};
use crate::daemon::clock;
use crate::meters::listen::bus::{LOOKED_AT, Reply, question, reply};
use crate::meters::port::Port;
use std::time::Duration;

/// How long a unit may take to answer, beside the time on the wire; slower ones exist (common practice, no source).
const ANSWER: Duration = Duration::from_millis(100);

/// A bus on which at least one unit answered.
#[derive(Debug)]
pub(super) struct Bus {
    pub(super) framing: Framing,
    pub(super) units: Vec<Unit>,
}

/// A unit that answered.
#[derive(Debug)]
pub(super) struct Unit {
    pub(super) address: u8,
    /// By which code it refused register 0 of the input table, if it did.
    pub(super) exception: Option<u8>,
    pub(super) registers: Vec<(Table, u16, u16)>,
}

/// The first framing at which a unit answers, and all units there.
pub(super) async fn scan(ear: &Ear, units: (u8, u8)) -> Result<Option<Bus>, Failure> {
    for baud in ear.rates() {
        for parity in [Parity::None, Parity::Even] {
            let framing = framing(*baud, parity);
            let Some(port) = ear.open(framing)? else {
                continue;
            };
            say(&format!(
                "asking units {} to {} at {}\n",
                units.0,
                units.1,
                framing_text(framing)
            ));
            let mut found = Vec::new();
            for address in units.0..=units.1 {
                if let Some(unit) = unit(ear, &port, framing, address).await? {
                    say(&format!(
                        "  unit {address} answers; {} registers from 0 to 9\n",
                        unit.registers.len()
                    ));
                    found.push(unit);
                }
            }
            if !found.is_empty() {
                return Ok(Some(Bus {
                    framing,
                    units: found,
                }));
            }
        }
    }
    Ok(None)
}

/// A unit that is there answers every read, be it with an exception.
async fn unit(
    ear: &Ear,
    port: &Port,
    framing: Framing,
    address: u8,
) -> Result<Option<Unit>, Failure> {
    let (mut registers, mut exception, mut there) = (Vec::new(), None, false);
    'tables: for table in [Table::Input, Table::Holding] {
        for register in 0..LOOKED_AT {
            match ask(ear, port, framing, address, (table, register)).await? {
                Some(Reply::Register(word)) => registers.push((table, register, word)),
                Some(Reply::Exception(code)) => {
                    if table == Table::Input && register == 0 {
                        exception = Some(code);
                    }
                    there = true;
                    break;
                }
                // What comes late could be taken for the answer to the next question: no more of this unit.
                None => break 'tables,
            }
        }
    }
    there |= !registers.is_empty();
    Ok(there.then_some(Unit {
        address,
        exception,
        registers,
    }))
}

async fn ask(
    ear: &Ear,
    port: &Port,
    framing: Framing,
    address: u8,
    register: (Table, u16),
) -> Result<Option<Reply>, Failure> {
    let (table, register) = register;
    let gone = |error: std::io::Error| ear.gone(&error);
    let frame = question(address, table, register);
    // 8 bytes there and 7 back, 11 bits each, and the silence of 3.5 characters before.
    let byte = Duration::from_micros(11_000_000 / u64::from(framing.baud.max(1)));
    let mut bytes = Vec::new();
    let silence = (byte * 7 / 2).max(Duration::from_micros(1750));
    while read_until(port, &mut bytes, clock::instant() + silence)
        .await
        .map_err(gone)?
        > 0
        && bytes.len() < 4096
    {}
    bytes.clear();
    port.write(&frame).await.map_err(gone)?;
    let until = clock::instant() + ANSWER + byte * 15;
    while clock::instant() < until {
        read_until(port, &mut bytes, until).await.map_err(gone)?;
        if let Some(reply) = reply(&bytes, address, table) {
            return Ok(Some(reply));
        }
    }
    Ok(None)
}
