use super::*;
use proptest::prelude::*;

const HALIFAX: Tz = Tz::America__Halifax;

/// 2026-03-02T13:14:00Z.
fn now() -> Timestamp {
    Timestamp::from_ms(1_772_457_240_000)
}

fn check(text: &str, want: &str) {
    let got = match parse_time(text, HALIFAX, now()) {
        Ok(time) => rfc3339_ms(time),
        Err(error) => error.to_string(),
    };
    assert_eq!(got, want, "{text}");
}

#[test]
fn a_time_is_read_in_every_shape_people_write() {
    check("2026-03-02T09:14:00Z", "2026-03-02T09:14:00.000Z");
    check("2026-03-02T09:14:00.25-04:00", "2026-03-02T13:14:00.250Z");
    check("2026-03-02 09:14", "2026-03-02T13:14:00.000Z");
    check("2026-03-02 09:14:30", "2026-03-02T13:14:30.000Z");
    check("2026-07-02 09:14", "2026-07-02T12:14:00.000Z");
    check("2026-03-02T09:14", "2026-03-02T13:14:00.000Z");
    check("2026-03-02", "2026-03-02T04:00:00.000Z");
    check("-2h", "2026-03-02T11:14:00.000Z");
    check("-1d2h", "2026-03-01T11:14:00.000Z");
}

#[test]
fn what_is_no_time_is_told_the_shapes_that_are() {
    for text in [
        "",
        "yesterday",
        "2h",
        "--2h",
        "-",
        "-2",
        "2026-13-01",
        "2026-02-30 10:00",
        "2026-03-02 24:00",
        "09:14",
    ] {
        check(
            text,
            &format!(
                "`{text}` is no time; write `2026-03-02 09:14`, `2026-03-02T09:14:00Z`, `2026-03-02` or `-2h`"
            ),
        );
    }
}

#[test]
fn an_hour_skipped_in_spring_is_refused_with_both_readings() {
    // Halifax, 2026-03-08: 02:00 AST became 03:00 ADT (the zone database).
    check(
        "2026-03-08 02:30",
        "`2026-03-08 02:30` never was in America/Halifax, the clocks went forward over it; \
         write `2026-03-08T01:30:00-04:00` or `2026-03-08T03:30:00-03:00`",
    );
    check("2026-03-08 03:00", "2026-03-08T06:00:00.000Z");
    check("2026-03-08 01:59:59", "2026-03-08T05:59:59.000Z");
}

#[test]
fn an_hour_that_was_twice_in_autumn_is_refused_with_both_moments() {
    check(
        "2026-11-01 01:30",
        "`2026-11-01 01:30` was twice in America/Halifax, the clocks went back; \
         write `2026-11-01T01:30:00-03:00` or `2026-11-01T01:30:00-04:00`",
    );
}

#[test]
fn both_readings_offered_are_themselves_good_times() {
    check("2026-11-01T01:30:00-03:00", "2026-11-01T04:30:00.000Z");
    check("2026-11-01T01:30:00-04:00", "2026-11-01T05:30:00.000Z");
    check("2026-03-08T01:30:00-04:00", "2026-03-08T05:30:00.000Z");
}

#[test]
fn a_day_whose_midnight_was_skipped_begins_when_the_gap_ends() {
    // Cairo, 2026-04-24: midnight became 01:00 (the zone database).
    let day = parse_time("2026-04-24", Tz::Africa__Cairo, now()).unwrap();
    assert_eq!(rfc3339_ms(day), "2026-04-23T22:00:00.000Z");
}

#[test]
fn people_read_the_wall_clock_of_the_site() {
    assert_eq!(local(now(), HALIFAX), "2026-03-02 09:14");
    assert_eq!(local_with_zone(now(), HALIFAX), "2026-03-02 09:14 AST");
    let july = now().plus_ms(122 * 86_400_000);
    assert_eq!(local_with_zone(july, HALIFAX), "2026-07-02 10:14 ADT");
}

#[test]
fn a_duration_is_read_in_every_unit_and_together() {
    for (text, ms) in [
        ("500ms", 500),
        ("90s", 90_000),
        ("5m", 300_000),
        ("2h", 7_200_000),
        ("7d", 604_800_000),
        ("1h30m", 5_400_000),
        ("1m500ms", 60_500),
        ("0s", 0),
    ] {
        assert_eq!(
            parse_duration(text),
            Ok(Duration::from_millis(ms)),
            "{text}"
        );
    }
}

#[test]
fn what_is_no_duration_is_refused() {
    for text in [
        "",
        "5",
        "s",
        "1.5h",
        "-2h",
        "30m1h",
        "1h1h",
        "5 m",
        "5min",
        "9223372036854775807d",
        "5é",
    ] {
        assert!(parse_duration(text).is_err(), "{text}");
    }
}

#[test]
fn an_import_takes_milliseconds_and_rfc_3339() {
    for text in [
        "1772457240000",
        "2026-03-02T13:14:00Z",
        "2026-03-02T09:14:00.000-04:00",
        "2026-03-02 13:14:00Z",
    ] {
        assert_eq!(epoch_or_rfc3339(text), Ok(now()), "{text}");
    }
    assert_eq!(
        epoch_or_rfc3339("2026-03-02").unwrap_err().to_string(),
        "`2026-03-02` is no time; write `2026-03-02T09:14:00Z` or milliseconds since 1970"
    );
}

#[test]
fn a_moment_no_calendar_reaches_is_still_read_back() {
    for ms in [
        i64::MIN,
        YEAR_0_MS - 1,
        YEAR_0_MS,
        YEAR_10000_MS - 1,
        YEAR_10000_MS,
        i64::MAX,
    ] {
        let t = Timestamp::from_ms(ms);
        assert_eq!(epoch_or_rfc3339(&rfc3339_ms(t)), Ok(t), "{ms}");
        assert!(!local(t, HALIFAX).is_empty());
    }
}

/// Texts near the fixed shape: mostly right, with every part able to leave its range.
fn nearly_rfc3339() -> impl Strategy<Value = String> {
    "[0-9]{4}-[01][0-9]-[0-3][0-9][Tt ][0-2][0-9]:[0-6][0-9]:[0-6][0-9](\\.[0-9]{0,11})?(Z|z|[+-][0-2][0-9]:[0-6][0-9]|)"
}

proptest! {
    #[test]
    fn the_fast_reader_of_times_agrees_with_the_calendar_library(text in nearly_rfc3339()) {
        let slow = DateTime::parse_from_rfc3339(&text).map(|t| t.timestamp_millis()).ok();
        if let Some(ms) = plain_rfc3339_ms(text.as_bytes()) {
            prop_assert_eq!(Some(ms), slow);
        }
        prop_assert_eq!(epoch_or_rfc3339(&text).map(Timestamp::ms).ok(), slow);
    }

    #[test]
    fn a_moment_printed_is_read_back_by_the_fast_reader(ms in YEAR_0_MS..YEAR_10000_MS) {
        let text = rfc3339_ms(Timestamp::from_ms(ms));
        prop_assert_eq!(plain_rfc3339_ms(text.as_bytes()), Some(ms), "{}", text);
    }

    #[test]
    fn a_duration_printed_is_read_back(ms in 0..i64::MAX as u64) {
        let duration = Duration::from_millis(ms);
        prop_assert_eq!(parse_duration(&duration_text(duration)), Ok(duration));
    }

    #[test]
    fn any_text_is_a_time_or_is_named_in_the_refusal(text in "\\PC*") {
        if let Err(error) = parse_time(&text, HALIFAX, now()) {
            prop_assert!(error.to_string().contains(text.trim()));
        }
        if let Err(error) = epoch_or_rfc3339(&text) {
            prop_assert!(error.to_string().contains(&text));
        }
        if let Err(error) = parse_duration(&text) {
            prop_assert_eq!(error.text, text);
        }
    }
}
