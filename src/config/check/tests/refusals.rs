//! Everything that is refused, each with its place, its words and its remedy.

use super::{ConfigError, edited, load};

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

#[test]
fn limits_that_meet() {
    check(
        &[("low = 6.8, high = 8.6", "low = 8.0, high = 8.0")],
        "
40:38 point.alarm.low: `low` 8 is not below `high` 8 -> write `low` below 8, or `high` above 8",
    );
}

#[test]
fn a_deadband_exactly_as_wide_as_its_band() {
    check(
        &[
            ("low = 6.8, high = 8.6", "low = 6.5, high = 8.5"),
            ("deadband = 0.1", "deadband = 2.0"),
        ],
        "
40:83 point.alarm.deadband: a deadband of 2 leaves nothing of the band from 6.5 to 8.5 -> write a deadband well below 2",
    );
}

#[test]
fn one_adapter_for_two_lines_by_its_serial_number() {
    check(
        &[
            (
                r#""/dev/serial/by-id/usb-rs485-0001""#,
                r#"{ usb_serial = "A10K7" }"#,
            ),
            (r#""/dev/ttyUSB0""#, r#"{ usb_serial = "A10K7" }"#),
        ],
        "
23:27 line.device.usb_serial: usb_serial `A10K7` is already taken on line 8 -> one adapter is one line: put its meters on that line, or name the other adapter",
    );
}

#[test]
fn a_sensor_that_is_named_twice() {
    check(
        &[(
            r#""pond-3.temp_c""#,
            r#"{ signal = "pond-3.temp_c", ohms = "pond-3.temp_c" }"#,
        )],
        r#"
37:43 point.temperature.ohms: `signal` names the sensor already -> write `"meter.temp_c"`, `{ signal = "meter.temp_c", fallback = 20.0 }`, `{ ohms = "meter.ohms", sensor = "pt1000" }` or `{ fixed = 25.0 }`"#,
    );
}
