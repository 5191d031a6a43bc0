//! # `listen`: an unknown meter's rate, the shape of its lines, and the block of configuration that reads it

mod ear;
mod scan;

use super::context::{Context, put};
use super::exit::Exit;
use super::failure::Failure;
use super::run::runtime;
use crate::config::site::{Device, Framing, Parity};
use crate::config::time;
use crate::meters::listen::guess::{Guess, Told, guess};
use crate::meters::listen::propose;
use clap::builder::TypedValueParser as _;
use ear::{Ear, Understood};
use serde_json::{Value, json};
use std::io::Write as _;
use std::path::PathBuf;
use std::time::Duration;

/// Find baud rate and line shape of an unknown meter and propose its `[[line]]` and `[[meter]]`
///
/// Only listens, unless told to ask. What is heard is shown as it comes; the block goes to standard output.
#[derive(Debug, clap::Args)]
#[command(after_help = "\
Example:
  halfcell listen /dev/ttyUSB0
  halfcell listen /dev/ttyUSB0 --ask
  halfcell listen /dev/serial/by-id/usb-rs485-0001 --modbus --units 1-20")]
pub(super) struct Args {
    /// The serial device
    device: PathBuf,
    /// Only this rate, instead of the common ones
    #[arg(long, value_name = "RATE", value_parser = clap::value_parser!(u32).range(50..=10_000_000))]
    baud: Option<u32>,
    /// Ask with words any meter may know: a carriage return, a line feed too, `*IDN?`
    #[arg(long, conflicts_with = "modbus")]
    ask: bool,
    /// Look for the units of a Modbus RTU bus; only reads
    #[arg(long)]
    modbus: bool,
    /// Which units, with --modbus
    #[arg(long, value_name = "FROM-TO", default_value = "1-32", requires = "modbus",
          value_parser = clap::builder::StringValueParser::new().try_map(|text| units(&text)))]
    units: (u8, u8),
    /// How long to listen at each rate
    #[arg(long = "for", value_name = "D", default_value = "6s")]
    patience: String,
}

/// `1-32`, or one unit.
fn units(text: &str) -> Result<(u8, u8), String> {
    let (from, to) = text.split_once('-').unwrap_or((text, text));
    let unit = |text: &str| {
        text.trim()
            .parse::<u8>()
            .ok()
            .filter(|n| (1..=247).contains(n))
    };
    match (unit(from), unit(to)) {
        (Some(from), Some(to)) if from <= to => Ok((from, to)),
        _ => Err("units are numbers from 1 to 247, such as `1-32`".to_owned()),
    }
}

pub(super) fn run(context: &Context, args: &Args) -> Result<Exit, Failure> {
    let patience = time::parse_duration(&args.patience)
        .map_err(|error| Failure::request(error.to_string()).at("argument `--for`"))?;
    if patience < Duration::from_millis(100) || patience > Duration::from_mins(10) {
        return Err(Failure::request(
            "`--for` is 100ms at least and 10m at most",
        ));
    }
    let ear = Ear::new(args.device.clone(), args.baud, patience);
    runtime()?.block_on(async {
        if args.modbus {
            let found = scan::scan(&ear, args.units).await?;
            return told_bus(context, &ear, args.units, found);
        }
        let heard = if args.ask { ear.ask().await? } else { ear.listen().await? };
        match heard {
            Some(understood) => told(context, &ear, &understood),
            None if args.ask => Err(Failure::no(format!("{} does not answer", args.device.display()))
                .at(format!("rates: {}", ear.rates_text()))
                .remedy("see that the meter is on and RX and TX are not swapped; without --ask it is only listened to, with --modbus a bus is looked for")),
            None => Err(ear.not_understood()),
        }
    })
}

/// What was understood, as text or JSON; no block where it cannot be told what is what.
fn told(context: &Context, ear: &Ear, understood: &Understood) -> Result<Exit, Failure> {
    let guessed = guess(&understood.lines);
    let heading = ear.heading(understood.framing);
    let block = guessed.as_ref().ok().map(|guess| {
        propose::text_meter(
            &heading,
            guess,
            understood.ask,
            understood.terminator.as_deref(),
        )
    });
    if context.json {
        let lines: Vec<String> = understood.lines.iter().map(|line| shown(line)).collect();
        let columns = guessed.as_ref().map(columns).unwrap_or_default();
        context.put_json(&json!({
            "device": heading.device.to_string(),
            "verdict": if block.is_some() { "told" } else { "cannot-tell" },
            "baud": understood.framing.baud,
            "data_bits": understood.framing.data_bits,
            "parity": understood.framing.parity.name(),
            "ask": understood.ask,
            "identification": understood.identification,
            "columns": columns,
            "why": guessed.as_ref().err().map(ToString::to_string),
            "lines": lines,
            "block": block,
        }))?;
    }
    let guess = match &guessed {
        Ok(guess) => guess,
        Err(why) => {
            return Err(Failure::no(format!("cannot tell: {why}"))
                .at(format!("{}, {}", heading.device, framing_text(understood.framing)))
                .remedy("write the pattern by hand from the lines above, with a group `mv` and a group `temp_c`"));
        }
    };
    say(&format!(
        "understood at {}\n",
        framing_text(understood.framing)
    ));
    for column in columns(guess) {
        say(&format!("  {}\n", column_text(&column)));
    }
    if let Err(why) = &guess.temp_c {
        say(&format!("  temperature: cannot tell: {why}\n"));
    }
    match block {
        Some(block) if !context.json => put(&block),
        _ => Ok(Exit::Done),
    }
}

/// The columns with what each was taken for.
fn columns(guess: &Guess) -> Vec<Value> {
    let role = |n: usize| -> Option<(&str, &Told)> {
        let temp_c = guess.temp_c.as_ref().ok().map(|told| ("temp_c", told));
        [Some(("mv", &guess.mv)), temp_c]
            .into_iter()
            .flatten()
            .find(|(_, told)| told.column == n)
    };
    let columns = guess.columns.iter().enumerate();
    columns
        .map(|(n, column)| {
            let role = role(n);
            json!({
                "column": n + 1,
                "example": column.example,
                "unit": column.unit,
                "name": column.name,
                "guess": role.map(|(signal, _)| signal),
                "scale": role.map(|(_, told)| told.scale),
                "sure": role.map(|(_, told)| told.sure.to_string()),
                "why": role.map(|(_, told)| told.why.as_str()),
            })
        })
        .collect()
}

/// `column 2, -23.4: mv, certain: `mV` stands behind it`.
fn column_text(column: &Value) -> String {
    let text = |key: &str| column[key].as_str().unwrap_or("").to_owned();
    let guessed = match column["guess"].as_str() {
        Some(signal) => format!("{signal}, {}: {}", text("sure"), text("why")),
        None => "not used".to_owned(),
    };
    format!(
        "column {}, `{}`: {guessed}",
        column["column"],
        text("example")
    )
}

fn told_bus(
    context: &Context,
    ear: &Ear,
    units: (u8, u8),
    found: Option<scan::Bus>,
) -> Result<Exit, Failure> {
    let Some(bus) = found else {
        return Err(Failure::no(format!("no unit from {} to {} answers", units.0, units.1))
            .at(format!("{}, rates {}, parity none and even", ear.device().display(), ear.rates_text()))
            .remedy("see that A and B are not swapped and that the units have power; try other addresses with --units"));
    };
    let heading = ear.heading(bus.framing);
    let blocks = bus.units.iter().map(|unit| {
        let registers: Vec<_> = unit
            .registers
            .iter()
            .map(|(table, address, _)| (*table, *address))
            .collect();
        (!registers.is_empty()).then(|| propose::modbus_meter(&heading, unit.address, &registers))
    });
    let blocks: String = blocks.flatten().collect();
    let block = (!blocks.is_empty()).then(|| {
        format!(
            "# Which register is which, and its scale, stands in the meter's manual: rename them to mv and temp_c.\n{}{blocks}",
            propose::line(&heading, "modbus-rtu")
        )
    });
    if context.json {
        let units: Vec<Value> = bus
            .units
            .iter()
            .map(|unit| {
                let registers = unit.registers.iter().map(|(table, address, word)| {
                    json!({ "table": table.name(), "register": address, "u16": word, "i16": word.cast_signed() })
                });
                json!({ "unit": unit.address, "exception": unit.exception, "registers": registers.collect::<Vec<_>>() })
            })
            .collect();
        context.put_json(&json!({
            "device": heading.device.to_string(),
            "verdict": "modbus",
            "baud": bus.framing.baud,
            "data_bits": bus.framing.data_bits,
            "parity": bus.framing.parity.name(),
            "units": units,
            "block": block,
        }))?;
    }
    match block {
        Some(block) if !context.json => put(&block),
        Some(_) => Ok(Exit::Done),
        None => Err(
            Failure::no("units answer, and none shows a register from 0 to 9")
                .remedy("take the addresses from the meter's manual"),
        ),
    }
}

/// `9600 baud, 8 data bits, no parity`.
fn framing_text(framing: Framing) -> String {
    let parity = match framing.parity {
        Parity::None => "no parity".to_owned(),
        other => format!("{other} parity"),
    };
    format!(
        "{} baud, {} data bits, {parity}",
        framing.baud, framing.data_bits
    )
}

/// A line for people: printable, whatever stood in it.
fn shown(line: &[u8]) -> String {
    line.iter()
        .flat_map(|&byte| std::ascii::escape_default(byte))
        .map(char::from)
        .collect()
}

/// Talk, on standard error; nobody need be there.
fn say(text: &str) {
    drop(std::io::stderr().lock().write_all(text.as_bytes()));
}

/// Where the device is, as the configuration will name it.
fn device(path: &std::path::Path) -> Device {
    Device::Path(path.to_path_buf())
}
