//! # `[[line]]`

use super::{Once, or};
use crate::config::keys;
use crate::config::problem::Problems;
use crate::config::raw::{Table, Value};
use crate::config::site::{Device, Framing, Line, Parity, Protocol};
use std::path::PathBuf;

/// What is known of a line, even when it is faulty.
#[derive(Debug)]
pub(super) struct KnownLine {
    pub(super) name: Option<String>,
    pub(super) protocol: Option<Protocol>,
    pub(super) line: Option<Line>,
}

pub(super) fn lines(tables: &[Table<'_>], problems: &mut Problems<'_>) -> Vec<KnownLine> {
    let (mut names, mut devices) = (Once::default(), Once::default());
    let mut lines = Vec::new();
    for table in tables {
        let name = table.need("name", problems);
        let name = name.and_then(|value| {
            let name = value.name(problems)?;
            names.take(name, &value, "give this line a name of its own", problems);
            Some(name.to_owned())
        });
        let device = table.need("device", problems);
        let device = device.and_then(|value| device_of(&value, &mut devices, problems));
        let framing = framing(table, problems);
        let protocol = table
            .need("protocol", problems)
            .and_then(|value| value.word(problems));
        let line = || {
            Some(Line {
                name: name.clone()?,
                device: device?,
                framing: framing?,
                protocol: protocol?,
            })
        };
        let line = line();
        lines.push(KnownLine {
            name,
            protocol,
            line,
        });
    }
    lines
}

fn device_of(value: &Value<'_>, devices: &mut Once, problems: &mut Problems<'_>) -> Option<Device> {
    let instead = "one adapter is one line: put its meters on that line, or name the other adapter";
    if !value.is_table() {
        let path = value.name(problems)?;
        devices.take(path, value, instead, problems);
        return Some(Device::Path(PathBuf::from(path)));
    }
    let table = value.table(&keys::DEVICE, problems)?;
    let serial = table.need("usb_serial", problems)?;
    let number = serial.name(problems)?;
    // A path cannot begin so, hence no number is taken for a path.
    devices.take(&format!("usb_serial {number}"), &serial, instead, problems);
    Some(Device::UsbSerial(number.to_owned()))
}

fn framing(table: &Table<'_>, problems: &mut Problems<'_>) -> Option<Framing> {
    let baud = or(table, "baud", 9600, |value| {
        value.whole_in(50..=10_000_000, problems)
    });
    let data_bits = or(table, "data_bits", 8, |value| {
        value.whole_in(5..=8, problems)
    });
    let parity = or(table, "parity", Parity::None, |value| value.word(problems));
    let stop_bits = or(table, "stop_bits", 1, |value| {
        value.whole_in(1..=2, problems)
    });
    Some(Framing {
        baud: baud?,
        data_bits: data_bits?,
        parity: parity?,
        stop_bits: stop_bits?,
    })
}
