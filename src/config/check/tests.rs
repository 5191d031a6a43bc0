use super::*;
use crate::config::render;
use crate::config::site::{
    Alarm, Device, Effluent, Framing, Layout, Meter, Parity, Point, Protocol, Register, Sensor,
    Sides, Signal, SignalRef, Source, Temperature, Water, WordOrder,
};
use crate::electrode::history::{ProbeKind, Tag};
use proptest::prelude::*;

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

/// Loads the edited example and compares every problem, one a line: line:column, key, problem, what to write instead.
fn check(edits: &[(&str, &str)], want: &str) {
    let text = edited(edits);
    let errors = load(&text).err().unwrap_or_default();
    let line = |e: &ConfigError| {
        format!(
            "\n{}:{} {}: {} -> {}",
            e.line, e.column, e.key, e.problem, e.instead
        )
    };
    let got: String = errors.iter().map(line).collect();
    assert_eq!(got, want, "\n{got}\n");
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
#[test]
fn a_key_that_is_not_known() {
    check(
        &[
            ("baud     = 9600", "bauds    = 9600"),
            ("tolerance   = 0.10  ", "tolerence   = 0.10  "),
            ("deadband = 0.1", "dead_band = 0.1"),
            (
                r#"timezone = "America"#,
                r#"colour = 1
timezone = "America"#,
            ),
        ],
        "
3:1 site.colour: `colour` is no key of [site] -> known here: name, timezone, ledger, commit_window
10:1 line.bauds: `bauds` is no key of [[line]] -> did you mean `baud`?
40:1 point.tolerence: `tolerence` is no key of [[point]] -> did you mean `tolerance`?
41:72 point.alarm.dead_band: `dead_band` is no key of alarm -> did you mean `deadband`?",
    );
}

#[test]
fn a_value_of_the_wrong_kind() {
    check(
        &[
            ("baud     = 9600 ", r#"baud     = "9600" "#),
            (r#"every       = "1s""#, "every       = 1"),
            ("high = 8.6", r#"high = "8.6""#),
            (
                r#"redundant_with = ["POND-3B"]"#,
                r#"redundant_with = "POND-3B""#,
            ),
            (
                "water       = { salinity = 0.0, alkalinity_meq_l = 1.8, total_ammonia_mg_l = 0.6 }",
                "water       = 0.0",
            ),
            ("unit  = 11 ", "unit  = 11.0 "),
            (
                r#"tag         = "POND-3"
"#,
                "tag         = 3
",
            ),
            (r#"temperature = "pond-3.temp_c""#, "temperature = 25.0"),
        ],
        r#"
9:12 line.baud: `baud` wants a whole number, not text -> write for example `baud = 9600`
15:9 meter.unit: `unit` wants a whole number, not a decimal number -> write for example `unit = 11`
34:15 point.tag: `tag` wants text between quotes, not a whole number -> write for example `tag = "POND-3"`
37:15 point.temperature: this is no temperature -> write `"meter.temp_c"`, `{ signal = "meter.temp_c", fallback = 20.0 }`, `{ ohms = "meter.ohms", sensor = "pt1000" }` or `{ fixed = 25.0 }`
38:15 point.every: `every` wants a duration between quotes, not a whole number -> write for example `every = "1s"`
40:50 point.alarm.high: `high` wants a number, not text -> write for example `high = 8.6`
41:18 point.redundant_with: `redundant_with` wants a list of texts, not text -> write for example `redundant_with = ["POND-3B"]`
42:15 point.water: `water` wants a table, not a decimal number -> write for example `water = { salinity = 0.0 }`"#,
    );
}

#[test]
fn a_key_that_is_missing() {
    check(
        &[
            (
                r#"name     = "Sable Creek Hatchery"
"#,
                "
",
            ),
            (
                r#"device   = "/dev/ttyUSB0"
"#,
                "
",
            ),
            ("unit  = 11   ", "#"),
            (r#"type = "i16", scale = 0.1 }   #"#, "scale = 0.1 }   #"),
            ("tolerance   = 0.10                ", "#"),
            (
                "effluent    = { low = 6.0, high = 9.0 }",
                "effluent    = { high = 9.0 }",
            ),
        ],
        r#"
1:1 site.name: `name` is missing in [site] -> add `name = "Sable Creek Hatchery"`
12:1 meter.unit: `unit` is missing in [[meter]] -> add `unit = 11`
18:10 meter.signals.mv.type: `type` is missing in a signal -> add `type = "i16"`
21:1 line.device: `device` is missing in [[line]] -> add `device = "/dev/ttyUSB0"`
33:1 point.tolerance: `tolerance` is missing in [[point]] -> add `tolerance = 0.10`
43:15 point.effluent.low: `low` is missing in effluent -> add `low = 6.0`"#,
    );
}

#[test]
fn a_name_that_points_nowhere() {
    check(
        &[
            (r#"line  = "raceway-bus""#, r#"line  = "raceway-buss""#),
            (
                r#"signal      = "pond-3.mv""#,
                r#"signal      = "pond3.mv""#,
            ),
            (r#""pond-3.temp_c""#, r#""pond-3.temp""#),
            (r#"["POND-3B"]"#, r#"["POND-3C", "POND-3"]"#),
            (r#""raceway-1.mv""#, r#""mv""#),
        ],
        r#"
14:9 meter.line: no line is called `raceway-buss` -> did you mean `raceway-bus`?
36:15 point.signal: no meter is called `pond3` -> did you mean `pond-3`?
37:15 point.temperature: meter `pond-3` has no signal `temp` -> did you mean `temp_c`?
41:19 point.redundant_with: no point has the tag `POND-3C` -> did you mean `POND-3B`?
41:30 point.redundant_with: a point cannot stand in for itself -> name the other points in the same liquid, or remove it
49:15 point.signal: `mv` names no signal of a meter -> write meter and signal with a point between, for example `signal = "pond-3.mv"`"#,
    );
}

#[test]
fn a_word_that_is_not_known() {
    check(
        &[
            (r#""modbus-rtu"  "#, r#""modbus"  "#),
            (r#""America/Halifax""#, r#""Halifax""#),
            (r#"quantity    = "ph"  "#, r#"quantity    = "pH"  "#),
            (
                r#"table = "input", type = "i16", scale = 0.1 }   #"#,
                r#"table = "coil", type = "int16", scale = 0.1 }   #"#,
            ),
            (r#"protocol = "stream""#, r#"protocol = "talking""#),
        ],
        "
3:12 site.timezone: `Halifax` is no time zone -> did you mean `America/Halifax`?
10:12 line.protocol: `modbus` is no protocol -> did you mean `modbus-rtu`?
24:12 line.protocol: `talking` is no protocol -> write one of `modbus-rtu`, `query`, `stream`
35:15 point.quantity: `pH` is no kind of probe -> did you mean `ph`?",
    );
}

#[test]
fn register_words_that_are_not_known() {
    check(&[(r#"table = "input", type = "i16", scale = 0.1 }   #"#, r#"table = "coil", type = "int16", word_order = "swapped", scale = 0.1 }   #"#)], "
18:34 meter.signals.mv.table: `coil` is no register table -> write one of `input`, `holding`
18:49 meter.signals.mv.type: `int16` is no register type -> write one of `i16`, `u16`, `i32`, `u32`, `f32`
18:71 meter.signals.mv.word_order: `swapped` is no word order -> write one of `big`, `little`");
}

#[test]
fn an_unknown_checksum_and_side() {
    check(
        &[
            (
                r#"name    = "pond-3"
"#,
                r#"name    = "pond-3"
checksum = "crc16"
"#,
            ),
            (
                "high = 9.0 }       #",
                r#"high = 9.0, sides = "above", flow = "weir.flow" }       #"#,
            ),
        ],
        "
28:12 meter.checksum: `crc16` is no checksum -> did you mean `crc16-modbus`?
44:48 point.effluent.sides: `above` is no choice of sides -> write one of `both`, `low`, `high`
44:64 point.effluent.flow: no meter is called `weir` -> known here: raceway-1, pond-3",
    );
}

#[test]
fn a_site_table_written_as_a_list() {
    check(
        &[("[site]", "[[site]]")],
        "
1:1 site: `site` wants a table, not a list -> write `[site]`",
    );
}

#[test]
fn a_time_zone_on_no_map() {
    check(&[(r#""America/Halifax""#, r#""Mare Tranquillitatis""#)], "
3:12 site.timezone: `Mare Tranquillitatis` is no time zone -> write a name of the zone database, such as `America/Halifax` or `UTC`");
}

#[test]
fn names_that_stand_twice() {
    check(&[(r#""pond-usb"
device"#, r#""raceway-bus"
device"#), (r#""/dev/ttyUSB0""#, r#""/dev/serial/by-id/usb-rs485-0001""#), (r#"name    = "pond-3""#, r#"name    = "raceway-1""#), (r#"tag         = "POND-3B""#, r#"tag         = "POND-3""#)], "
22:12 line.name: name `raceway-bus` is already taken on line 7 -> give this line a name of its own
23:12 line.device: device `/dev/serial/by-id/usb-rs485-0001` is already taken on line 8 -> one adapter is one line: put its meters on that line, or name the other adapter
27:11 meter.name: name `raceway-1` is already taken on line 13 -> give this meter a name of its own
47:15 point.tag: tag `POND-3` is already taken on line 34 -> give this point a tag of its own");
}

#[test]
fn a_unit_twice_on_one_bus() {
    check(&[(r#"[[line]]
name     = "pond-usb""#, r#"[[meter]]
name = "raceway-2"
line = "raceway-bus"
unit = 11
[meter.signals]
mv = { register = 0, table = "input", type = "i16" }

[[line]]
name     = "pond-usb""#)], "
24:8 meter.unit: unit 11 is already taken on line 15 -> two meters on one line must differ in this, or each would take the other's figures for its own");
}

#[test]
fn two_meters_with_one_pattern_on_one_line() {
    check(
        &[(
            "[[point]]",
            r#"[[meter]]
name = "pond-4"
line = "pond-usb"
pattern = '(?<mv>[-+]?\d+[.,]\d+)\s*mV\s+(?<temp_c>[-+]?\d+[.,]\d+)'

[[point]]"#,
        )],
        r"
36:11 meter.pattern: pattern `(?<mv>[-+]?\d+[.,]\d+)\s*mV\s+(?<temp_c>[-+]?\d+[.,]\d+)` is already taken on line 29 -> two meters on one line must differ in this, or each would take the other's figures for its own",
    );
}

#[test]
fn a_low_limit_above_the_high_one() {
    check(&[("low = 6.8", "low = 8.8")], "
40:38 point.alarm.low: `low` 8.8 is not below `high` 8.6 -> write `low` below 8.6, or `high` above 8.8");
}

#[test]
fn limits_out_of_order_on_one_side() {
    check(&[("low_low = 6.5", "low_low = 6.9"), ("high_high = 9.0", "high_high = 8.5")], "
40:27 point.alarm.low_low: `low_low` 6.9 is not below `low` 6.8 -> write `low_low` below 6.8, or `low` above 6.9
40:50 point.alarm.high: `high` 8.6 is not below `high_high` 8.5 -> write `high` below 8.5, or `high_high` above 8.6");
}

#[test]
fn a_deadband_wider_than_its_band() {
    check(&[("deadband = 0.1", "deadband = 1.8")], "
40:83 point.alarm.deadband: a deadband of 1.8 leaves nothing of the band from 6.8 to 8.6 -> write a deadband well below 1.8");
}

#[test]
fn a_limit_no_ph_can_reach() {
    check(
        &[("low = 6.8", "low = 68")],
        "
40:38 point.alarm.low: 68 pH is outside -2 to 16 pH -> write for example `low = 6.8`",
    );
}

#[test]
fn an_alarm_without_limits() {
    check(&[("low_low = 6.5, low = 6.8, high = 8.6, high_high = 9.0, ", "")], "
40:15 point.alarm: an alarm without a limit never rings -> add `low`, `high`, `low_low` or `high_high`");
}

#[test]
fn a_permit_band_upside_down() {
    check(
        &[("{ low = 6.0, high = 9.0 }", "{ low = 9.0, high = 6.0 }")],
        "
43:23 point.effluent.low: `low` 9 is not below `high` 6 -> write `low` below 6, or `high` above 9",
    );
}

#[test]
fn a_flow_limit_without_a_flow() {
    check(
        &[(
            "{ low = 6.0, high = 9.0 }",
            "{ low = 6.0, high = 9.0, flow_above = 1.0 }",
        )],
        r#"
43:40 point.effluent.flow_above: `flow_above` says nothing without `flow` -> add `flow = "weir.flow"`, or remove it"#,
    );
}

#[test]
fn a_pattern_that_cannot_be_read() {
    check(
        &[("(?<mv>[", "(?<mv[")],
        r"
29:11 meter.pattern: the pattern cannot be read: invalid group name -> name each figure's group: '(?<mv>[-+]?\d+[.,]\d+)\s*mV'",
    );
}

#[test]
fn a_pattern_without_a_named_group() {
    check(
        &[("(?<mv>", "("), ("(?<temp_c>", "(")],
        r"
29:11 meter.pattern: the pattern names no signal -> name each figure's group: '(?<mv>[-+]?\d+[.,]\d+)\s*mV'",
    );
}

#[test]
fn a_factor_for_a_group_the_pattern_lacks() {
    check(
        &[(
            r#"# protocol = "query" adds"#,
            r#"[meter.signals]
mV = { scale = -1.0 }
# protocol = "query" adds"#,
        )],
        "
31:1 meter.signals.mV: the pattern has no group `mV` -> did you mean `mv`?",
    );
}

#[test]
fn a_register_in_a_text_meter() {
    check(&[(r#"# protocol = "query" adds"#, r#"[meter.signals]
mv = { scale = -1.0, register = 3 }
# protocol = "query" adds"#)], "
31:22 meter.signals.mv.register: `register` belongs to a modbus-rtu meter -> remove it: here the pattern says where the figure stands");
}

#[test]
fn a_scale_of_nothing() {
    check(&[("scale = 0.1 }   #", "scale = 0 }   #")], "
18:65 meter.signals.mv.scale: a scale of 0 makes every figure 0 -> write the factor from the meter's figure to the unit, such as `0.1`; `-1.0` sets a reversed sign right");
}

#[test]
fn a_frame_no_port_can_do() {
    check(
        &[(
            "baud     = 9600 ",
            r#"baud = 9
data_bits = 9
stop_bits = 3
parity = "mark"
#"#,
        )],
        "
9:8 line.baud: 9 is outside 50 to 10000000 -> write for example `baud = 9600`
10:13 line.data_bits: 9 is outside 5 to 8 -> write for example `data_bits = 8`
11:13 line.stop_bits: 3 is outside 1 to 2 -> write for example `stop_bits = 1`
12:10 line.parity: `mark` is no parity -> write one of `none`, `even`, `odd`",
    );
}

#[test]
fn a_unit_address_outside_the_standard() {
    check(
        &[("unit  = 11 ", "unit  = 248 ")],
        "
15:9 meter.unit: 248 is outside 1 to 247 -> write for example `unit = 11`",
    );
}

#[test]
fn durations_outside_sense() {
    check(
        &[
            (r#"every       = "1s""#, r#"every       = "50ms""#),
            (
                r#"every = "1s"
"#,
                r#"every = "10x"
timeout = "2m"
"#,
            ),
            (r#"on_delay = "60s""#, r#"on_delay = "2d""#),
            (
                r#"timezone = "America"#,
                r#"commit_window = "100ms"
timezone = "America"#,
            ),
        ],
        r#"
3:17 site.commit_window: 100ms is outside 250ms to 1m -> write for example `commit_window = "1s"`
17:9 meter.every: `10x` is no duration -> write `500ms`, `90s`, `5m`, `2h`, `7d` or `1h30m`
18:11 meter.timeout: 2m is outside 10ms to 1m -> write for example `timeout = "500ms"`
40:15 point.every: 50ms is outside 100ms to 1d -> write for example `every = "1s"`
42:99 point.alarm.on_delay: 2d is outside 0s to 1d -> write for example `on_delay = "60s"`"#,
    );
}

#[test]
fn figures_that_are_no_figures() {
    check(
        &[
            ("tolerance   = 0.10  ", "tolerance   = nan  "),
            ("deadband = 0.1", "deadband = -0.1"),
            ("low = 6.8", "low = inf"),
        ],
        "
39:15 point.tolerance: `tolerance` is no finite number -> write for example `tolerance = 0.10`
40:38 point.alarm.low: `low` is no finite number -> write for example `low = 6.8`
40:83 point.alarm.deadband: -0.1 pH is outside 0 to 16 pH -> write for example `deadband = 0.1`",
    );
}

#[test]
fn a_tolerance_of_nothing() {
    check(
        &[("tolerance   = 0.10  ", "tolerance   = 0.0  ")],
        "
39:15 point.tolerance: 0 pH is outside 0.001 to 5 pH -> write for example `tolerance = 0.10`",
    );
}

#[test]
fn a_modbus_key_on_a_text_line() {
    check(&[(r#"name    = "pond-3"
"#, r#"name    = "pond-3"
unit = 3
"#)], "
28:1 meter.unit: `unit` has no place in a meter on a stream line -> remove it; if the meter speaks modbus-rtu, say so in `protocol` of line `pond-usb`");
}

#[test]
fn a_text_key_on_a_modbus_line() {
    check(&[(r#"every = "1s"
"#, r#"every = "1s"
ask = "READ?"
pattern = "x"
"#)], "
17:1 meter.ask: `ask` has no place in a meter on a modbus-rtu line -> remove it; if the meter speaks query, say so in `protocol` of line `raceway-bus`
18:1 meter.pattern: `pattern` has no place in a meter on a modbus-rtu line -> remove it; if the meter speaks stream or query, say so in `protocol` of line `raceway-bus`");
}

#[test]
fn a_query_meter_without_a_question() {
    check(
        &[(r#"protocol = "stream""#, r#"protocol = "query""#)],
        r#"
26:1 meter.ask: `ask` is missing in [[meter]] -> add `ask = "READ?\r\n"`"#,
    );
}

#[test]
fn a_question_with_an_unknown_escape() {
    check(
        &[
            (r#"protocol = "stream""#, r#"protocol = "query""#),
            (
                r#"name    = "pond-3"
"#,
                r#"name    = "pond-3"
ask = 'READ\q'
terminator = ""
"#,
            ),
        ],
        r#"
28:7 meter.ask: `\q` stands for no byte -> write plain ASCII and `\r`, `\n`, `\t`, `\0`, `\\`, `\x02`
29:14 meter.terminator: `terminator` is empty -> write for example `terminator = "\r\n"`"#,
    );
}

#[test]
fn a_pair_that_runs_over_the_last_register() {
    check(&[(r#"register = 0, table = "input", type = "i16""#, r#"register = 65535, table = "input", type = "f32""#)], "
18:23 meter.signals.mv.register: a value of two registers cannot begin at the last, 65535 -> write the address of its first register, at most 65534");
}

#[test]
fn a_word_order_for_one_register() {
    check(&[(r#"type = "i16", scale = 0.1 }   #"#, r#"type = "i16", word_order = "little", scale = 0.1 }   #"#)], "
18:57 meter.signals.mv.word_order: i16 is one register and has no word order -> remove it, or write a type of two registers: `i32`, `u32`, `f32`");
}

#[test]
fn a_temperature_from_two_places() {
    check(
        &[(
            r#""pond-3.temp_c""#,
            r#"{ fixed = 25.0, signal = "pond-3.temp_c" }"#,
        )],
        r#"
37:17 point.temperature.fixed: a temperature is fixed or comes from a signal, not both -> write `"meter.temp_c"`, `{ signal = "meter.temp_c", fallback = 20.0 }`, `{ ohms = "meter.ohms", sensor = "pt1000" }` or `{ fixed = 25.0 }`"#,
    );
}

#[test]
fn ohms_without_a_sensor() {
    check(
        &[(r#""pond-3.temp_c""#, r#"{ ohms = "pond-3.temp_c" }"#)],
        r#"
37:15 point.temperature.sensor: `sensor` is missing in temperature -> add `sensor = "pt1000"`"#,
    );
}

#[test]
fn a_temperature_table_that_says_nothing() {
    check(
        &[(r#""pond-3.temp_c""#, "{ fallback = 20.0 }")],
        r#"
37:15 point.temperature: this says no temperature -> write `"meter.temp_c"`, `{ signal = "meter.temp_c", fallback = 20.0 }`, `{ ohms = "meter.ohms", sensor = "pt1000" }` or `{ fixed = 25.0 }`"#,
    );
}

#[test]
fn a_fixed_temperature_of_boiling_oil() {
    check(
        &[(r#""pond-3.temp_c""#, "{ fixed = 250 }")],
        "
37:25 point.temperature.fixed: 250 °C is outside -10 to 150 °C -> write for example `fixed = 25.0`",
    );
}

#[test]
fn ph_chemistry_at_an_orp_point() {
    check(&[(r#"quantity    = "ph"  "#, r#"quantity    = "orp"  "#), ("tolerance   = 0.10  ", "tolerance   = 10  "), ("low_low = 6.5, low = 6.8, high = 8.6, high_high = 9.0, deadband = 0.1", "low = 300")], "
41:19 point.redundant_with: `POND-3B` measures ph, this point orp -> name points of the same quantity only
42:1 point.water: `water` is about pH, and this point measures orp -> remove it, or move it to the pH point in the same liquid
43:1 point.effluent: `effluent` is about pH, and this point measures orp -> remove it, or move it to the pH point in the same liquid");
}

#[test]
fn one_line_as_a_plain_table() {
    check(&[(r#"[[line]]
name     = "raceway-bus""#, r#"[line]
name     = "raceway-bus""#)], "
6:2 line: `line` is a table, and must be a list of tables -> write `[[line]]`
21:3 TOML: duplicate key -> keep one of the two; a list of tables has double brackets: `[[line]]`, `[[meter]]`, `[[point]]`");
}

#[test]
fn a_backslash_between_double_quotes() {
    check(
        &[(
            r"pattern = '(?<mv>[-+]?\d+[.,]\d+)\s*mV\s+(?<temp_c>[-+]?\d+[.,]\d+)'",
            r#"pattern = "(?<mv>\d+)""#,
        )],
        r#"
29:19 TOML: missing escaped value, expected `b`, `e`, `f`, `n`, `r`, `\`, `"`, `x`, `u`, `U` -> put text with backslashes between single quotes, or double each backslash"#,
    );
}

#[test]
fn an_empty_over_range_word() {
    check(
        &[(
            r#"name    = "pond-3"
"#,
            r#"name    = "pond-3"
over_range = ["OL", ""]
"#,
        )],
        r#"
28:21 meter.over_range: `over_range` wants texts that are not empty -> write for example `over_range = ["----", "OL"]`"#,
    );
}

#[test]
fn a_name_with_blanks() {
    check(
        &[(r#"name    = "pond-3""#, r#"name    = "pond-3 ""#)],
        r#"
27:11 meter.name: `name` begins or ends with a blank -> write for example `name = "raceway-1"`"#,
    );
}

#[test]
fn a_signal_name_with_a_dot() {
    check(&[("temp_c = {", r#""temp.c" = {"#)], "
19:1 meter.signals.temp.c: `temp.c` is no name for a signal -> write letters, digits, `_` and `-` only, such as `mv` or `temp_c`");
}

#[test]
fn a_faulty_line_is_not_blamed_twice() {
    check(
        &[
            (r#"protocol = "modbus-rtu"  "#, r#"protocol = "rtu"  "#),
            (r#"name     = "pond-usb""#, "name     = 3"),
        ],
        r#"
10:12 line.protocol: `rtu` is no protocol -> write one of `modbus-rtu`, `query`, `stream`
22:12 line.name: `name` wants text between quotes, not a whole number -> write for example `name = "raceway-bus"`"#,
    );
}

#[test]
fn broken_toml_hides_nothing_else() {
    check(&[("baud     = 9600 ", "baud     = 96oo "), ("low = 6.8", "low = 8.8"), (r#"device   = "/dev/ttyUSB0""#, "device   = ")], "
9:12 TOML: string values must be quoted, expected literal string -> write `key = value`, text between quotes, one pair a line
23:12 TOML: string values must be quoted, expected literal string -> write `key = value`, text between quotes, one pair a line
40:38 point.alarm.low: `low` 8.8 is not below `high` 8.6 -> write `low` below 8.6, or `high` above 8.8");
}
