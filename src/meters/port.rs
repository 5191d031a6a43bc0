//! # The care of a serial port
//!
//! Always: 1. One owner: a second opener is refused. 2. A byte with a bad parity or frame arrives as NUL instead of vanishing.
//! 3. Nothing here ever waits for bytes to leave the wire.

use crate::config::site::{Device, Framing, Line, Parity};
use rustix::termios::{InputModes, OptionalActions, tcgetattr, tcsetattr};
use serialport::{DataBits, SerialPort, StopBits, TTYPort};
use std::fs::{self, File, OpenOptions};
use std::io;
use std::os::unix::fs::OpenOptionsExt;
use std::path::{Path, PathBuf};
use std::time::Duration;
use tokio::io::Interest;
use tokio::io::unix::AsyncFd;

/// Longest that a port may take to accept a question.
const WRITE_LIMIT: Duration = Duration::from_secs(2);

/// Why a line's port cannot be used; [`remedy`](Self::remedy) says what to do.
#[derive(Debug, thiserror::Error)]
pub enum PortError {
    /// Nothing stands at the path.
    #[error("line `{line}`: there is no {device}")]
    Absent {
        /// The line.
        line: String,
        /// Its device.
        device: String,
    },
    /// No USB adapter with the serial number.
    #[error("line `{line}`: no USB serial adapter with serial number `{serial}` is plugged in")]
    NoAdapter {
        /// The line.
        line: String,
        /// The serial number.
        serial: String,
    },
    /// More than one such adapter.
    #[error("line `{line}`: {found} USB serial adapters have serial number `{serial}`")]
    ManyAdapters {
        /// The line.
        line: String,
        /// The serial number.
        serial: String,
        /// How many.
        found: usize,
    },
    /// The device is there and does not open.
    #[error("line `{line}`: cannot open {device}")]
    Open {
        /// The line.
        line: String,
        /// Its device.
        device: String,
        /// The cause.
        source: io::Error,
    },
    /// The hardware cannot do the rate or frame.
    #[error("line `{line}`: {device} does not take {asked}, it stays at {got}")]
    Framing {
        /// The line.
        line: String,
        /// Its device.
        device: String,
        /// As configured.
        asked: String,
        /// As read back.
        got: String,
    },
}

impl PortError {
    /// What the reader can do.
    pub fn remedy(&self) -> &'static str {
        match self {
            Self::Absent { .. } => {
                "plug the adapter in, or set `device` to a path below /dev/serial/by-id"
            }
            Self::NoAdapter { .. } => {
                "plug the adapter in, or set `usb_serial` to the number of another one"
            }
            Self::ManyAdapters { .. } => "set `device` to a path below /dev/serial/by-path instead",
            Self::Open { source, .. } if source.kind() == io::ErrorKind::PermissionDenied => {
                "add the user that runs halfcell to the group that owns the device"
            }
            Self::Open { source, .. } if source.kind() == io::ErrorKind::ResourceBusy => {
                "stop the other program that has the port open"
            }
            Self::Open { .. } => {
                "see that the path is a serial port and that no other program has it open"
            }
            Self::Framing { .. } => {
                "set `baud`, `data_bits`, `parity` and `stop_bits` to what the adapter can do"
            }
        }
    }
}

/// An open port, owned alone, that never blocks.
#[derive(Debug)]
pub struct Port {
    wire: AsyncFd<File>,
    /// Holds the exclusive lock and the modem lines.
    _held: TTYPort,
}

impl Port {
    /// Finds and opens the port of a line. To be called where a runtime with IO runs.
    ///
    /// # Errors
    /// When the device is absent, taken, not a serial port, or cannot do the frame.
    pub fn open(line: &Line) -> Result<Self, PortError> {
        let path = find(line)?;
        let device = path.display().to_string();
        let failed = |source: io::Error| match source.kind() {
            io::ErrorKind::NotFound => PortError::Absent {
                line: line.name.clone(),
                device: device.clone(),
            },
            _ => PortError::Open {
                line: line.name.clone(),
                device: device.clone(),
                source,
            },
        };
        // This descriptor first: the exclusive mode that the other one sets would refuse it.
        let flags = rustix::fs::OFlags::NOCTTY | rustix::fs::OFlags::NONBLOCK;
        let wire = OpenOptions::new()
            .read(true)
            .write(true)
            .custom_flags(flags.bits().cast_signed())
            .open(&path)
            .map_err(failed)?;
        let held = settings(&device, line.framing)
            .open_native()
            .map_err(|e| failed(into_io(e)))?;
        keep_damaged_bytes(&wire, line.framing.parity).map_err(failed)?;
        let canonical = fs::canonicalize(&path).unwrap_or(path);
        // A pseudo-terminal has neither parity nor frame.
        if !canonical.starts_with("/dev/pts") {
            verify(&held, line, &device)?;
            shorten_latency(&canonical);
        }
        let wire = waited_for(wire, Interest::READABLE | Interest::WRITABLE).map_err(failed)?;
        Ok(Self { wire, _held: held })
    }

    /// Waits for bytes.
    ///
    /// # Errors
    /// When the device is gone, also where the system reports this as an end of file.
    pub async fn read(&self, into: &mut [u8]) -> io::Result<usize> {
        let n = self
            .wire
            .async_io(Interest::READABLE, |wire| {
                Ok(rustix::io::read(wire, &mut *into)?)
            })
            .await?;
        present(n)
    }

    /// The bytes that are there already; 0 when there are none.
    ///
    /// # Errors
    /// As for [`read`](Self::read).
    pub fn read_now(&self, into: &mut [u8]) -> io::Result<usize> {
        match rustix::io::read(self.wire.get_ref(), into) {
            Ok(n) => present(n),
            Err(rustix::io::Errno::AGAIN | rustix::io::Errno::INTR) => Ok(0),
            Err(error) => Err(error.into()),
        }
    }

    /// Hands all bytes to the port.
    ///
    /// # Errors
    /// When the device is gone or takes nothing for two seconds.
    pub async fn write(&self, mut bytes: &[u8]) -> io::Result<()> {
        while !bytes.is_empty() {
            let write = self.wire.async_io(Interest::WRITABLE, |wire| {
                Ok(rustix::io::write(wire, bytes)?)
            });
            let n = tokio::time::timeout(WRITE_LIMIT, write)
                .await
                .map_err(|_| io::ErrorKind::TimedOut)??;
            bytes = bytes.get(present(n)?..).unwrap_or(&[]);
        }
        Ok(())
    }
}

/// A file that the runtime waits for instead of blocking.
///
/// # Errors
/// When the system cannot wait for such a file.
#[expect(
    deprecated,
    reason = "its only successor is an unsafe function, asking that the descriptor stays open and in place; a File's does"
)]
pub fn waited_for(file: File, interest: Interest) -> io::Result<AsyncFd<File>> {
    AsyncFd::with_interest(file, interest)
}

/// A read or write of nothing means that the device is gone.
fn present(n: usize) -> io::Result<usize> {
    if n == 0 {
        Err(io::Error::new(
            io::ErrorKind::UnexpectedEof,
            "the device is gone",
        ))
    } else {
        Ok(n)
    }
}

/// Where the device of a line is now.
///
/// # Errors
/// When no adapter, or more than one, has the USB serial number.
pub fn find(line: &Line) -> Result<PathBuf, PortError> {
    match &line.device {
        Device::Path(path) => Ok(path.clone()),
        Device::UsbSerial(serial) => {
            let found = adapters(Path::new("/sys/class/tty"), serial);
            match found.as_slice() {
                [] => Err(PortError::NoAdapter {
                    line: line.name.clone(),
                    serial: serial.clone(),
                }),
                [name] => Ok(Path::new("/dev").join(name)),
                more => Err(PortError::ManyAdapters {
                    line: line.name.clone(),
                    serial: serial.clone(),
                    found: more.len(),
                }),
            }
        }
    }
}

/// Names of the terminals whose USB device has this serial number. `classes` is `/sys/class/tty`.
fn adapters(classes: &Path, serial: &str) -> Vec<String> {
    let Ok(entries) = fs::read_dir(classes) else {
        return Vec::new();
    };
    let has_serial = |name: &str| {
        let device = fs::canonicalize(classes.join(name).join("device")).ok()?;
        // The serial number stands in the first folder upwards that describes a whole USB device.
        let usb = device
            .ancestors()
            .find(|folder| folder.join("idVendor").exists())?;
        let found = fs::read_to_string(usb.join("serial")).ok()?;
        (found.trim() == serial).then_some(())
    };
    let mut names: Vec<String> = entries
        .flatten()
        .filter_map(|entry| entry.file_name().into_string().ok())
        .filter(|name| has_serial(name).is_some())
        .collect();
    names.sort();
    names
}

fn settings(device: &str, framing: Framing) -> serialport::SerialPortBuilder {
    serialport::new(device, framing.baud)
        .data_bits(data_bits(framing.data_bits))
        .parity(match framing.parity {
            Parity::None => serialport::Parity::None,
            Parity::Even => serialport::Parity::Even,
            Parity::Odd => serialport::Parity::Odd,
        })
        .stop_bits(if framing.stop_bits == 2 {
            StopBits::Two
        } else {
            StopBits::One
        })
}

const fn data_bits(n: u8) -> DataBits {
    match n {
        5 => DataBits::Five,
        6 => DataBits::Six,
        7 => DataBits::Seven,
        _ => DataBits::Eight,
    }
}

/// Without this a byte with a bad parity or frame is dropped and "-23.4" can arrive as "-2.4".
fn keep_damaged_bytes(wire: &File, parity: Parity) -> io::Result<()> {
    let mut modes = tcgetattr(wire)?;
    modes
        .input_modes
        .remove(InputModes::IGNPAR | InputModes::IGNBRK | InputModes::PARMRK);
    modes
        .input_modes
        .set(InputModes::INPCK, parity != Parity::None);
    Ok(tcsetattr(wire, OptionalActions::Now, &modes)?)
}

fn verify(held: &TTYPort, line: &Line, device: &str) -> Result<(), PortError> {
    let told = settings(device, line.framing);
    let got = (
        held.baud_rate(),
        held.data_bits(),
        held.parity(),
        held.stop_bits(),
    );
    let (Ok(baud), Ok(bits), Ok(parity), Ok(stop)) = got else {
        return Ok(());
    };
    let same = told
        .clone()
        .baud_rate(baud)
        .data_bits(bits)
        .parity(parity)
        .stop_bits(stop);
    if same == told {
        return Ok(());
    }
    let Framing {
        baud: asked_baud,
        data_bits,
        parity: asked_parity,
        stop_bits,
    } = line.framing;
    Err(PortError::Framing {
        line: line.name.clone(),
        device: device.to_owned(),
        asked: format!(
            "{asked_baud} baud, {data_bits} data bits, parity {asked_parity}, {stop_bits} stop bits"
        ),
        got: format!("{baud} baud, {bits} data bits, parity {parity}, {stop} stop bits")
            .to_lowercase(),
    })
}

/// Some adapters hold bytes back for 16 ms. Where the kernel lets this be set, it is; where not, nothing is lost but a few milliseconds.
fn shorten_latency(device: &Path) {
    if let Some(name) = device.file_name() {
        let timer = Path::new("/sys/bus/usb-serial/devices")
            .join(name)
            .join("latency_timer");
        drop(fs::write(timer, "1"));
    }
}

fn into_io(error: serialport::Error) -> io::Error {
    match error.kind() {
        serialport::ErrorKind::Io(kind) => io::Error::new(kind, error),
        serialport::ErrorKind::NoDevice => io::Error::new(io::ErrorKind::ResourceBusy, error),
        serialport::ErrorKind::InvalidInput => io::Error::new(io::ErrorKind::InvalidInput, error),
        serialport::ErrorKind::Unknown => io::Error::other(error),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::os::unix::fs::symlink;

    #[test]
    fn an_adapter_is_found_by_its_usb_serial_number_wherever_it_enumerates() {
        let sys = tempfile::tempdir().unwrap();
        let classes = sys.path().join("class");
        for (name, port, serial) in [
            ("ttyUSB0", "1-1", "A10K7"),
            ("ttyUSB3", "1-2", "B22"),
            ("ttyACM0", "1-3", "B22"),
        ] {
            let usb = sys.path().join("devices").join(port);
            fs::create_dir_all(usb.join("interface/tty")).unwrap();
            fs::write(usb.join("idVendor"), "0000\n").unwrap();
            fs::write(usb.join("serial"), format!("{serial}\n")).unwrap();
            fs::create_dir_all(classes.join(name)).unwrap();
            symlink(usb.join("interface/tty"), classes.join(name).join("device")).unwrap();
        }
        fs::create_dir_all(classes.join("tty0")).unwrap();
        assert_eq!(adapters(&classes, "A10K7"), ["ttyUSB0"]);
        assert_eq!(adapters(&classes, "B22"), ["ttyACM0", "ttyUSB3"]);
        assert_eq!(adapters(&classes, "A10"), Vec::<String>::new());
        assert_eq!(
            adapters(&sys.path().join("absent"), "A10K7"),
            Vec::<String>::new()
        );
    }
}
