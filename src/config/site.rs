//! # A site as checked: no name points nowhere, no unit is twice on a bus, no band is impossible

use crate::electrode::history::{ProbeKind, Tag};
use chrono_tz::Tz;
use std::path::PathBuf;
use std::time::Duration;

/// One installation: one daemon, one ledger.
#[derive(Debug, Clone, PartialEq)]
pub struct Site {
    /// Its name.
    pub name: String,
    /// Zone of reports and of times typed without a zone.
    pub timezone: Tz,
    /// The ledger's file.
    pub ledger: PathBuf,
    /// Readings are committed once in this time: 0.25 s to 60 s.
    pub commit_window: Duration,
    /// Serial lines.
    pub lines: Vec<Line>,
    /// Meters; `Meter::line` indexes `lines`.
    pub meters: Vec<Meter>,
    /// Measuring points; signals index `meters`.
    pub points: Vec<Point>,
}

impl Site {
    /// Index into `points` of the point with this tag.
    pub fn point_index(&self, tag: &Tag) -> Option<usize> {
        self.points.iter().position(|point| point.tag == *tag)
    }

    /// The point with this tag.
    pub fn point(&self, tag: &Tag) -> Option<&Point> {
        self.points.iter().find(|point| point.tag == *tag)
    }
}

/// A serial line.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Line {
    /// Its name.
    pub name: String,
    /// Where it is.
    pub device: Device,
    /// Rate and frame.
    pub framing: Framing,
    /// What is spoken on it.
    pub protocol: Protocol,
}

/// Where a line's adapter is found.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Device {
    /// At a path.
    Path(PathBuf),
    /// Wherever the USB adapter with this serial number enumerates.
    UsbSerial(String),
}

impl std::fmt::Display for Device {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::Path(path) => path.display().fmt(f),
            Self::UsbSerial(serial) => write!(f, "USB serial number {serial}"),
        }
    }
}

/// Rate and frame of a line.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Framing {
    /// Baud rate.
    pub baud: u32,
    /// 5 to 8.
    pub data_bits: u8,
    /// Parity bit.
    pub parity: Parity,
    /// 1 or 2.
    pub stop_bits: u8,
}

crate::electrode::named::named! {
    /// Parity bit of a serial frame.
    Parity, "parity" {
        /// No parity bit.
        None = "none",
        /// Even.
        Even = "even",
        /// Odd.
        Odd = "odd",
    }
}

crate::electrode::named::named! {
    /// What is spoken on a line.
    Protocol, "protocol" {
        /// Modbus RTU, several units on one bus.
        ModbusRtu = "modbus-rtu",
        /// The meter answers when asked.
        Query = "query",
        /// The meter talks on its own.
        Stream = "stream",
    }
}

/// An instrument on a line.
#[derive(Debug, Clone, PartialEq)]
pub struct Meter {
    /// Its name.
    pub name: String,
    /// Index into [`Site::lines`].
    pub line: usize,
    /// How it is read.
    pub source: Source,
    /// The signals it gives, by name, with the factor each is multiplied by.
    pub signals: Vec<Signal>,
}

/// A named signal of a meter.
#[derive(Debug, Clone, PartialEq)]
pub struct Signal {
    /// `mv`, `temp_c`, or a word of the engineer's.
    pub name: String,
    /// Factor from what the meter says to the signal's unit; −1.0 sets a reversed sign right.
    pub scale: f64,
    /// Where it lies in a Modbus meter; `None` in a text meter (there the pattern's group of that name gives it).
    pub register: Option<Register>,
}

/// How a meter is read.
#[derive(Debug, Clone, PartialEq)]
pub enum Source {
    /// Modbus RTU registers.
    Modbus {
        /// Unit address, 1 to 247.
        unit: u8,
        /// Time between polls.
        every: Duration,
        /// How long an answer may take.
        timeout: Duration,
    },
    /// Asked, answers with text.
    Query {
        /// The bytes sent.
        ask: Vec<u8>,
        /// Time between polls.
        every: Duration,
        /// How long an answer may take.
        timeout: Duration,
        /// Shape of the answer.
        text: TextShape,
    },
    /// Talks on its own.
    Stream {
        /// Shape of its lines.
        text: TextShape,
    },
}

/// The group of a pattern that holds the meter's own time: kept and compared with ours, no signal.
pub const OWN_TIME: &str = "time";

/// Shape of a meter's text lines.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct TextShape {
    /// Regular expression with named groups; checked to compile and to name at least one signal.
    pub pattern: String,
    /// End of a line; `None` is any of CR, LF, CR LF.
    pub terminator: Option<Vec<u8>>,
    /// Checksum at the end of the line.
    pub checksum: Option<Checksum>,
    /// Words the meter prints for over range.
    pub over_range: Vec<String>,
}

crate::electrode::named::named! {
    /// Checksum behind the last `*` or as the last field of a text line.
    Checksum, "checksum" {
        /// All bytes combined by exclusive or, two hexadecimal digits.
        Xor = "xor",
        /// Sum of the bytes modulo 256, two hexadecimal digits.
        Sum8 = "sum8",
        /// The Modbus CRC, four hexadecimal digits.
        Crc16Modbus = "crc16-modbus",
    }
}

/// A Modbus register or pair.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Register {
    /// Address on the wire, from 0.
    pub address: u16,
    /// Which table.
    pub table: Table,
    /// How its bits are read.
    pub layout: Layout,
    /// Which word of a pair comes first.
    pub word_order: WordOrder,
}

crate::electrode::named::named! {
    /// A Modbus register table.
    Table, "register table" {
        /// Read-only input registers (function 4).
        Input = "input",
        /// Holding registers (function 3).
        Holding = "holding",
    }
}

crate::electrode::named::named! {
    /// How register bits are read.
    Layout, "register type" {
        /// Signed, one register.
        I16 = "i16",
        /// Unsigned, one register.
        U16 = "u16",
        /// Signed, two registers.
        I32 = "i32",
        /// Unsigned, two registers.
        U32 = "u32",
        /// IEEE 754, two registers.
        F32 = "f32",
    }
}

crate::electrode::named::named! {
    /// Order of the two words of a 32-bit value.
    WordOrder, "word order" {
        /// High word first.
        Big = "big",
        /// Low word first.
        Little = "little",
    }
}

/// One signal of one meter.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct SignalRef {
    /// Index into [`Site::meters`].
    pub meter: usize,
    /// Index into that meter's `signals`.
    pub signal: usize,
}

/// A measuring point.
#[derive(Debug, Clone, PartialEq)]
pub struct Point {
    /// Its tag.
    pub tag: Tag,
    /// pH or ORP.
    pub quantity: ProbeKind,
    /// The millivolts.
    pub signal: SignalRef,
    /// The temperature.
    pub temperature: Temperature,
    /// Logging interval; the median of what arrived in it is the reading.
    pub every: Duration,
    /// The largest expanded uncertainty this point can live with, in its unit.
    pub tolerance: f64,
    /// Standard uncertainty of the residual junction potential between buffer and liquid, pH (ORP: mV).
    pub u_junction: f64,
    /// Standard uncertainty of the temperature, °C.
    pub u_temp_c: f64,
    /// Alarm limits.
    pub alarm: Option<Alarm>,
    /// Indices into [`Site::points`] of the points in the same liquid.
    pub redundant_with: Vec<usize>,
    /// For what is derived from pH.
    pub water: Option<Water>,
    /// Excursion accounting.
    pub effluent: Option<Effluent>,
}

/// Where a point's temperature comes from.
#[derive(Debug, Clone, PartialEq)]
pub enum Temperature {
    /// A meter's signal in °C, with an optional figure to stand in when it fails.
    Signal {
        /// The signal.
        signal: SignalRef,
        /// Stands in when the sensor fails; u grows accordingly and the source is named.
        fallback_c: Option<f64>,
    },
    /// A figure the engineer stands for.
    Fixed(f64),
    /// A sensor's resistance.
    Resistance {
        /// The signal in ohm.
        signal: SignalRef,
        /// Which sensor.
        sensor: Sensor,
        /// As for `Signal`.
        fallback_c: Option<f64>,
    },
}

crate::electrode::named::named! {
    /// A resistance thermometer.
    Sensor, "temperature sensor" {
        /// Platinum, 100 Ω at 0 °C.
        Pt100 = "pt100",
        /// Platinum, 1000 Ω at 0 °C.
        Pt1000 = "pt1000",
    }
}

/// Alarm limits of a point, in its unit.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Alarm {
    /// Lowest limit.
    pub low_low: Option<f64>,
    /// Low limit.
    pub low: Option<f64>,
    /// High limit.
    pub high: Option<f64>,
    /// Highest limit.
    pub high_high: Option<f64>,
    /// How far back inside before it counts as returned.
    pub deadband: f64,
    /// How long outside before it counts.
    pub on_delay: Duration,
    /// How long inside before it has returned.
    pub off_delay: Duration,
}

/// What is known of the water besides its pH.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Water {
    /// Salinity, g/kg.
    pub salinity: f64,
    /// Alkalinity, meq/L.
    pub alkalinity_meq_l: Option<f64>,
    /// Total ammonia nitrogen, mg/L N.
    pub total_ammonia_mg_l: Option<f64>,
}

/// Excursion accounting of an effluent.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Effluent {
    /// Lower limit.
    pub low: f64,
    /// Upper limit.
    pub high: f64,
    /// Minutes a month may spend outside.
    pub total_minutes: f64,
    /// Minutes one excursion may last.
    pub single_minutes: f64,
    /// Which sides count.
    pub sides: Sides,
    /// Flow signal and the figure above which there is discharge.
    pub flow: Option<(SignalRef, f64)>,
}

crate::electrode::named::named! {
    /// Which side of a permit band counts.
    Sides, "choice of sides" {
        /// Both.
        Both = "both",
        /// Below the lower limit only.
        Low = "low",
        /// Above the upper limit only.
        High = "high",
    }
}
