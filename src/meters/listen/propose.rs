//! # A block of configuration for what was heard

use super::guess::Guess;
use crate::config::site::{Device, Framing, Layout, Parity, Table};

/// What a block is to say of the line and the meter on it.
#[derive(Debug, Clone, PartialEq)]
pub struct Heading {
    /// Name of the line; its meter is called the same with `-meter` behind it.
    pub name: String,
    /// Where it is.
    pub device: Device,
    /// Rate and frame at which it was understood.
    pub framing: Framing,
}

/// A meter that talks on its own, or answers to `ask`.
pub fn text_meter(
    heading: &Heading,
    guess: &Guess,
    ask: Option<&str>,
    terminator: Option<&[u8]>,
) -> String {
    let protocol = if ask.is_some() { "query" } else { "stream" };
    let mut block = vec![
        line(heading, protocol),
        "\n[[meter]]\n".to_owned(),
        format!("name    = {}\n", quoted(&format!("{}-meter", heading.name))),
        format!("line    = {}\n", quoted(&heading.name)),
    ];
    if let Some(ask) = ask {
        block.push(format!("ask     = \"{ask}\"\nevery   = \"1s\"\n"));
    }
    let pattern = guess.pattern.replace('\'', r"\x27");
    block.push(format!("pattern = '{pattern}'\n"));
    if let Some(terminator) = terminator {
        let escaped: Vec<String> = terminator.iter().map(|b| format!("\\x{b:02x}")).collect();
        block.push(format!("terminator = '{}'\n", escaped.concat()));
    }
    if let Some(checksum) = guess.checksum {
        block.push(format!("checksum = \"{checksum}\"\n"));
    }
    if !guess.over_range.is_empty() {
        let words: Vec<String> = guess.over_range.iter().map(|word| quoted(word)).collect();
        block.push(format!("over_range = [{}]\n", words.join(", ")));
    }
    let scale = guess.mv.scale;
    if (scale - 1.0).abs() > 1e-12 {
        block.push(format!("[meter.signals]\nmv = {{ scale = {scale:?} }}\n"));
    }
    block.concat()
}

/// A unit of a Modbus bus with registers whose meaning nobody has told: its manual names and scales them.
pub fn modbus_meter(heading: &Heading, unit: u8, registers: &[(Table, u16)]) -> String {
    let signal = |(table, address): &(Table, u16)| {
        let layout = Layout::I16;
        format!(
            "{table}_{address} = {{ register = {address}, table = \"{table}\", type = \"{layout}\" }}\n"
        )
    };
    let signals: String = registers.iter().map(signal).collect();
    format!(
        "\n[[meter]]\nname  = {}\nline  = {}\nunit  = {unit}\nevery = \"1s\"\n[meter.signals]\n{signals}",
        quoted(&format!("{}-{unit}", heading.name)),
        quoted(&heading.name)
    )
}

/// The `[[line]]` table.
pub fn line(heading: &Heading, protocol: &str) -> String {
    let Framing {
        baud,
        data_bits,
        parity,
        stop_bits,
    } = heading.framing;
    let device = match &heading.device {
        Device::Path(path) => quoted(&path.display().to_string()),
        Device::UsbSerial(serial) => format!("{{ usb_serial = {} }}", quoted(serial)),
    };
    let mut block = format!(
        "[[line]]\nname     = {}\ndevice   = {device}\nbaud     = {baud}\n",
        quoted(&heading.name)
    );
    let unusual = [
        (data_bits != 8).then(|| format!("data_bits = {data_bits}\n")),
        (parity != Parity::None).then(|| format!("parity   = \"{parity}\"\n")),
        (stop_bits != 1).then(|| format!("stop_bits = {stop_bits}\n")),
    ];
    block.extend(unusual.into_iter().flatten());
    block + &format!("protocol = \"{protocol}\"\n")
}

/// A basic string of TOML.
fn quoted(text: &str) -> String {
    let escaped: String = text
        .chars()
        .flat_map(|c| match c {
            '"' | '\\' => vec!['\\', c],
            c if c.is_control() => format!("\\u{:04X}", u32::from(c)).chars().collect(),
            c => vec![c],
        })
        .collect();
    format!("\"{escaped}\"")
}
