use super::*;
use crate::config::render;
use crate::config::site::{
    Alarm, Device, Effluent, Framing, Layout, Meter, Parity, Point, Protocol, Register, Sensor,
    Sides, Signal, SignalRef, Source, Temperature, Water, WordOrder,
};
use crate::electrode::history::{ProbeKind, Tag};
use proptest::prelude::*;

mod refusals;

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

/// The example with some of its words replaced, each once.
fn edited(edits: &[(&str, &str)]) -> String {
    edits.iter().fold(EXAMPLE.to_owned(), |text, (old, new)| {
        assert!(text.contains(old), "the example has no `{old}`");
        text.replacen(old, new, 1)
    })
}

#[test]
fn several_errors_are_shown_at_once_in_the_order_of_the_file() {
    let text = edited(&[
        ("\"America/Halifax\"", "\"America/Halifaks\""),
        ("baud     = 9600", "baut     = 9600"),
        ("unit  = 11 ", "unit  = 0 "),
        ("low = 6.8", "low = 8.8"),
        ("\"raceway-1.mv\"", "\"raceway-1.vm\""),
    ]);
    let errors = load(&text).unwrap_err();
    let want = r#"
error: site.timezone: `America/Halifaks` is no time zone
 --> site.toml:3:12
  |
3 | timezone = "America/Halifaks"                  # for reports and the page; the ledger is UTC
  |            ^^^^^^^^^^^^^^^^^^
  |
  = help: did you mean `America/Halifax`?

error: line.baut: `baut` is no key of [[line]]
 --> site.toml:9:1
  |
9 | baut     = 9600                               # data_bits = 8, parity = "none", stop_bits = 1 unless said
  | ^^^^
  |
  = help: did you mean `baud`?

error: meter.unit: 0 is outside 1 to 247
  --> site.toml:15:9
   |
15 | unit  = 0                                    # Modbus unit address
   |         ^
   |
   = help: write for example `unit = 11`

error: point.alarm.low: `low` 8.8 is not below `high` 8.6
  --> site.toml:40:38
   |
40 | alarm       = { low_low = 6.5, low = 8.8, high = 8.6, high_high = 9.0, deadband = 0.1, on_delay = "60s", off_delay = "120s" }
   |                                      ^^^
   |
   = help: write `low` below 8.6, or `high` above 8.8

error: point.signal: meter `raceway-1` has no signal `vm`
  --> site.toml:49:15
   |
49 | signal      = "raceway-1.vm"
   |               ^^^^^^^^^^^^^^
   |
   = help: did you mean `mv`?
"#;
    assert_eq!(render("site.toml", &text, &errors), want.trim_matches('\n'));
}

#[test]
fn an_empty_file_is_told_which_tables_it_lacks() {
    let errors = load("").unwrap_err();
    let want = "\
error: site: `site` is missing in the file
 --> site.toml:1:1
  |
1 |
  | ^
  |
  = help: add a table `[site]`";
    let got = render("site.toml", "", &errors);
    assert!(got.starts_with(want), "{got}");
    assert_eq!(errors.len(), 4, "{got}");
}

#[test]
fn the_example_becomes_the_site_it_describes() {
    let site = load(EXAMPLE).unwrap();
    assert_eq!(site.name, "Sable Creek Hatchery");
    assert_eq!(site.timezone, Tz::America__Halifax);
    assert_eq!(
        site.ledger,
        PathBuf::from("/var/lib/halfcell/sable-creek.db")
    );
    assert_eq!(site.commit_window, Duration::from_secs(1));
    let framing = Framing {
        baud: 9600,
        data_bits: 8,
        parity: Parity::None,
        stop_bits: 1,
    };
    assert!(site.lines.iter().all(|line| line.framing == framing));
    assert_eq!(site.lines[0].protocol, Protocol::ModbusRtu);
    assert_eq!(
        site.meters[0],
        Meter {
            name: "raceway-1".to_owned(),
            line: 0,
            source: Source::Modbus {
                unit: 11,
                every: Duration::from_secs(1),
                timeout: Duration::from_millis(500),
            },
            signals: vec![register("mv", 0), register("temp_c", 1)],
        }
    );
    let Source::Stream { text } = &site.meters[1].source else {
        panic!("{:?}", site.meters[1].source);
    };
    assert_eq!((&text.terminator, &text.checksum), (&None, &None));
    let names: Vec<&str> = site.meters[1]
        .signals
        .iter()
        .map(|s| s.name.as_str())
        .collect();
    assert_eq!(names, ["mv", "temp_c"]);
}

#[test]
fn the_point_of_the_example_has_its_figures_and_the_defaults() {
    let site = load(EXAMPLE).unwrap();
    let pond = SignalRef {
        meter: 1,
        signal: 0,
    };
    assert_eq!(
        site.points[0],
        Point {
            tag: Tag::from("POND-3"),
            quantity: ProbeKind::Ph,
            signal: pond,
            temperature: Temperature::Signal {
                signal: SignalRef { signal: 1, ..pond },
                fallback_c: None,
            },
            every: Duration::from_secs(1),
            tolerance: 0.1,
            u_junction: 0.01,
            u_temp_c: 0.2,
            alarm: Some(Alarm {
                low_low: Some(6.5),
                low: Some(6.8),
                high: Some(8.6),
                high_high: Some(9.0),
                deadband: 0.1,
                on_delay: Duration::from_mins(1),
                off_delay: Duration::from_mins(2),
            }),
            redundant_with: vec![1],
            water: Some(Water {
                salinity: 0.0,
                alkalinity_meq_l: Some(1.8),
                total_ammonia_mg_l: Some(0.6),
            }),
            effluent: Some(Effluent {
                low: 6.0,
                high: 9.0,
                total_minutes: 446.0,
                single_minutes: 60.0,
                sides: Sides::Both,
                flow: None,
            }),
        }
    );
}

#[test]
fn a_point_is_found_by_its_tag() {
    let site = load(EXAMPLE).unwrap();
    assert_eq!(site.point_index(&Tag::from("POND-3B")), Some(1));
    assert_eq!(site.point(&Tag::from("POND-3")), Some(&site.points[0]));
    assert_eq!(site.point_index(&Tag::from("POND-4")), None);
}

fn register(name: &str, address: u16) -> Signal {
    Signal {
        name: name.to_owned(),
        scale: 0.1,
        register: Some(Register {
            address,
            table: crate::config::site::Table::Input,
            layout: Layout::I16,
            word_order: WordOrder::Big,
        }),
    }
}

#[test]
fn points_in_one_liquid_know_each_other_whoever_said_so() {
    let site = load(EXAMPLE).unwrap();
    assert_eq!(site.points[1].redundant_with, [0]);
}

/// The temperature of the example's first point when written so.
fn temperature_written(text: &str) -> Temperature {
    let text = edited(&[("\"pond-3.temp_c\"", text)]);
    let site = load(&text).unwrap_or_else(|e| panic!("{}", render("site.toml", &text, &e)));
    site.points[0].temperature.clone()
}

#[test]
fn a_temperature_is_read_in_every_form() {
    let signal = SignalRef {
        meter: 1,
        signal: 1,
    };
    assert_eq!(
        temperature_written("{ fixed = 18 }"),
        Temperature::Fixed(18.0)
    );
    assert_eq!(
        temperature_written("{ signal = \"pond-3.temp_c\", fallback = 20.0 }"),
        Temperature::Signal {
            signal,
            fallback_c: Some(20.0)
        }
    );
    let ohms = Temperature::Resistance {
        signal,
        sensor: Sensor::Pt1000,
        fallback_c: None,
    };
    for form in ["ohms", "signal"] {
        let text = format!("{{ {form} = \"pond-3.temp_c\", sensor = \"pt1000\" }}");
        assert_eq!(temperature_written(&text), ohms);
    }
}

#[test]
fn limits_of_one_side_may_be_equal() {
    let text = edited(&[("low_low = 6.5", "low_low = 6.8")]);
    assert!(load(&text).is_ok());
}

#[test]
fn an_effluent_counts_while_anything_flows_unless_told_otherwise() {
    let flow = |more: &str| {
        let band = format!("{{ low = 6.0, high = 9.0, flow = \"raceway-1.mv\"{more} }}");
        let site = load(&edited(&[("{ low = 6.0, high = 9.0 }", &band)])).unwrap();
        site.points[0].effluent.unwrap().flow
    };
    let signal = SignalRef {
        meter: 0,
        signal: 0,
    };
    assert_eq!(flow(""), Some((signal, 0.0)));
    assert_eq!(flow(", flow_above = 0.5"), Some((signal, 0.5)));
}

#[test]
fn a_question_may_have_its_escapes_between_either_quotes() {
    for ask in [r#""READ?\r\n""#, r"'READ?\r\n'", r"'READ?\x0d\x0A'"] {
        let ask = format!("name    = \"pond-3\"\nask = {ask}\nterminator = '\\r'\n");
        let text = edited(&[
            ("protocol = \"stream\"", "protocol = \"query\""),
            ("name    = \"pond-3\"\n", &ask),
        ]);
        let site = load(&text).unwrap();
        let Source::Query { ask, text, .. } = &site.meters[1].source else {
            panic!("{:?}", site.meters[1].source);
        };
        assert_eq!(ask, b"READ?\r\n");
        assert_eq!(text.terminator.as_deref(), Some(&b"\r"[..]));
    }
}

#[test]
fn a_factor_sets_a_text_meters_sign_right() {
    let scale = "[meter.signals]\nmv = { scale = -1.0 }\n# protocol = \"query\" adds";
    let site = load(&edited(&[("# protocol = \"query\" adds", scale)])).unwrap();
    let scales: Vec<f64> = site.meters[1].signals.iter().map(|s| s.scale).collect();
    assert_eq!(scales, [-1.0, 1.0]);
}

#[test]
fn an_adapter_is_known_by_its_serial_number() {
    let site = load(&edited(&[(
        "\"/dev/ttyUSB0\"",
        "{ usb_serial = \"A10K7\" }",
    )]))
    .unwrap();
    assert_eq!(site.lines[1].device, Device::UsbSerial("A10K7".to_owned()));
}

#[test]
fn an_orp_point_stands_in_millivolts() {
    let text = edited(&[
        (
            "quantity    = \"ph\"\nsignal      = \"raceway-1.mv\"",
            "quantity    = \"orp\"\nsignal      = \"raceway-1.mv\"",
        ),
        (
            "tolerance   = 0.10\n",
            "tolerance   = 15\nalarm = { low = 650 }\n",
        ),
        ("redundant_with = [\"POND-3B\"]", "# alone"),
    ]);
    let site = load(&text).unwrap_or_else(|e| panic!("{}", render("site.toml", &text, &e)));
    let point = &site.points[1];
    assert!((point.u_junction - 2.0).abs() < 1e-12);
    let alarm = point.alarm.unwrap();
    assert_eq!((alarm.low, alarm.high), (Some(650.0), None));
    assert!((alarm.deadband - 10.0).abs() < 1e-12);
}

#[test]
fn every_file_in_the_config_folder_is_good() {
    let folder = std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("config");
    let mut n_files = 0;
    for entry in std::fs::read_dir(folder).unwrap() {
        let path = entry.unwrap().path();
        let text = std::fs::read_to_string(&path).unwrap();
        if let Err(errors) = load(&text) {
            panic!("{}", render(&path.display().to_string(), &text, &errors));
        }
        n_files += 1;
    }
    assert!(n_files >= 2, "only {n_files} files in config/");
}

/// Where each key of the example stands: byte range and line.
fn keys_of_the_example() -> Vec<(Range<usize>, usize)> {
    let mut keys = Vec::new();
    let mut start = 0;
    for (index, line) in EXAMPLE.split_inclusive('\n').enumerate() {
        let code = line.split('#').next().unwrap();
        // A key stands before ` =` or `=`; the pattern between quotes holds none.
        for (at, _) in code.match_indices('=') {
            let before = code[..at].trim_end();
            let key = before
                .rfind(|c: char| !(c.is_alphanumeric() || c == '_'))
                .map_or(0, |i| i + 1);
            if before.matches(['"', '\'']).count() % 2 == 0 {
                keys.push((start + key..start + before.len(), index + 1));
            }
        }
        start += line.len();
    }
    keys
}

#[test]
fn each_key_of_the_example_when_misspelt_is_named_at_its_line() {
    let keys = keys_of_the_example();
    assert!(keys.len() > 50, "{} keys found", keys.len());
    for (span, line) in keys {
        let mut text = EXAMPLE.to_owned();
        text.insert_str(span.end, "_zz");
        let errors = load(&text).err().unwrap_or_default();
        let wrong = format!("{}_zz", &EXAMPLE[span.clone()]);
        // A Modbus signal may have any name; then what points at it is wrong.
        let free = ["mv_zz", "temp_c_zz"].contains(&wrong.as_str());
        let named = errors
            .iter()
            .any(|e| e.line == line && e.span.start == span.start && e.problem.contains(&wrong));
        assert!(
            named || (free && !errors.is_empty()),
            "{wrong} on line {line}: {errors:#?}"
        );
    }
}

#[test]
fn each_value_of_the_example_when_of_a_wrong_kind_is_named_at_its_line() {
    for (span, line) in keys_of_the_example() {
        let behind = &EXAMPLE[span.end..];
        let value = span.end + behind.find('=').unwrap() + 1;
        let rest = &EXAMPLE[value..];
        let blank = rest.len() - rest.trim_start().len();
        let (open, at) = (rest.trim_start().as_bytes()[0], value + blank);
        let inside = &EXAMPLE[at + 1..];
        let end = match open {
            b'"' => at + 2 + inside.find('"').unwrap(),
            b'\'' => at + 2 + inside.find('\'').unwrap(),
            b'{' => at + 2 + inside.find('}').unwrap(),
            b'[' => at + 2 + inside.find(']').unwrap(),
            _ => at + 1 + inside.find([' ', ',', '\n']).unwrap(),
        };
        let mut text = EXAMPLE.to_owned();
        text.replace_range(at..end, "2026-03-02");
        let errors = load(&text).err().unwrap_or_default();
        let named = errors.iter().any(|e| e.line == line && e.span.start == at);
        assert!(named, "{} on line {line}: {errors:#?}", &EXAMPLE[span]);
    }
}

/// Laws of every answer, good or not.
fn answer_is_sound(text: &str) -> Result<(), TestCaseError> {
    let Err(errors) = load(text) else {
        return Ok(());
    };
    prop_assert!(!errors.is_empty());
    prop_assert!(errors.is_sorted_by_key(|error| error.span.start));
    for error in &errors {
        prop_assert!(error.span.end <= text.len() && error.span.start <= error.span.end);
        prop_assert!(error.line >= 1 && error.line <= text.matches('\n').count() + 1);
        prop_assert!(!error.problem.is_empty() && !error.instead.is_empty());
    }
    prop_assert!(!render("site.toml", text, &errors).is_empty());
    Ok(())
}

proptest! {
    #[test]
    fn any_text_gets_a_sound_answer(text in "\\PC*") {
        answer_is_sound(&text)?;
    }

    #[test]
    fn a_cut_and_mended_example_gets_a_sound_answer(
        from in 0..EXAMPLE.len(),
        len in 0..80_usize,
        put in "[\\[\\]{}='\"#,.0-9a-z\n\\\\ é]{0,12}",
    ) {
        let mut text = EXAMPLE.to_owned();
        text.replace_range(from..(from + len).min(EXAMPLE.len()), &put);
        answer_is_sound(&text)?;
    }
}
