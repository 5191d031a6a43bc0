use super::*;
use crate::config::render;

/// The example of the design's contract, as it stands there, and the second point that it names.
const EXAMPLE: &str = r#"[site]
name     = "Sable Creek Hatchery"
timezone = "America/Halifax"                  # for reports and the page; the ledger is UTC
ledger   = "/var/lib/halfcell/sable-creek.db"

[[line]]
name     = "raceway-bus"
device   = "/dev/serial/by-id/usb-rs485-0001" # or { usb_serial = "A10K7" } to find it wherever it enumerates
baud     = 9600                               # data_bits = 8, parity = "none", stop_bits = 1 unless said
protocol = "modbus-rtu"                       # "modbus-rtu" | "query" | "stream"

[[meter]]
name  = "raceway-1"
line  = "raceway-bus"
unit  = 11                                    # Modbus unit address
every = "1s"
[meter.signals]
mv     = { register = 0, table = "input", type = "i16", scale = 0.1 }   # i16 u16 i32 u32 f32; word_order = "big" | "little"
temp_c = { register = 1, table = "input", type = "i16", scale = 0.1 }

[[line]]
name     = "pond-usb"
device   = "/dev/ttyUSB0"
protocol = "stream"                           # the meter talks on its own

[[meter]]
name    = "pond-3"
line    = "pond-usb"
pattern = '(?<mv>[-+]?\d+[.,]\d+)\s*mV\s+(?<temp_c>[-+]?\d+[.,]\d+)'    # named groups are signals
# protocol = "query" adds:  ask = "READ?\r\n", every = "1s", timeout = "500ms"
# optional: terminator = "\r\n", checksum = "xor" | "sum8" | "crc16-modbus", over_range = ["----", "OL"]

[[point]]
tag         = "POND-3"
quantity    = "ph"                            # "ph" | "orp"
signal      = "pond-3.mv"
temperature = "pond-3.temp_c"                 # or { fixed = 25.0 }; ohms: { signal = "...", sensor = "pt1000" }
every       = "1s"                            # logging interval; the median of what arrived in it
tolerance   = 0.10                            # the largest u this point can live with
alarm       = { low_low = 6.5, low = 6.8, high = 8.6, high_high = 9.0, deadband = 0.1, on_delay = "60s", off_delay = "120s" }
redundant_with = ["POND-3B"]                  # other points in the same liquid
water       = { salinity = 0.0, alkalinity_meq_l = 1.8, total_ammonia_mg_l = 0.6 }   # optional: derived NH3-N and CO2
effluent    = { low = 6.0, high = 9.0 }       # optional: excursion accounting; also total_minutes, single_minutes (defaults: the
                                              # published rule), sides = "both" | "low" | "high", flow = "weir.flow" with flow_above = 0.0

[[point]]
tag         = "POND-3B"
quantity    = "ph"
signal      = "raceway-1.mv"
temperature = "raceway-1.temp_c"
tolerance   = 0.10
"#;

#[test]
fn the_example_of_the_contract_is_good() {
    if let Err(errors) = load(EXAMPLE) {
        panic!("{}", render("site.toml", EXAMPLE, &errors));
    }
}
