//! Probes, lots, grab samples and holds: what is recorded, what is refused.

use crate::harness::Site;
use halfcell::electrode::history::{ProbeId, Tag};
use halfcell::electrode::units::Timestamp;

/// 2026-03-02 09:14 in Halifax, UTC-4 then.
const MARCH_2_0914: Timestamp = Timestamp::from_ms(1_772_457_240_000);

#[test]
fn a_probe_is_added_placed_moved_and_retired() {
    let site = Site::new();
    let said =
        site.done("probe add P-1042 --kind ph --serial A1 --at '2026-03-01 08:00' --by 'M. Oake'");
    assert!(
        said.stdout.starts_with(
            "probe `P-1042` (ph) added\n  event 1, 2026-03-01 08:00, by M. Oake, backdated: entered 20"
        ),
        "{}",
        said.stdout
    );
    site.done("probe place P-1042 --point POND-3 --at '2026-03-02 09:14'");
    let probe = ProbeId::from("P-1042");
    let pond = Tag::from("POND-3");
    let sits = |t| site.book().probe_at(&pond, t).map(|p| p.spec.id.clone());
    assert_eq!(sits(MARCH_2_0914), Some(probe.clone()));
    assert_eq!(sits(MARCH_2_0914.plus_ms(-1)), None);
    site.done("probe place P-1042 --point POND-4 --at '2026-03-03 10:00'");
    assert_eq!(
        sits(MARCH_2_0914.plus_ms(2 * 86_400_000)),
        None,
        "it has moved on"
    );
    site.done("probe retire P-1042 --at '2026-03-05 10:00'");
    assert!(
        site.book()
            .probe(&probe)
            .unwrap()
            .retired_at(MARCH_2_0914.plus_ms(4 * 86_400_000))
    );
    let list = site.done("probe list");
    assert_eq!(
        list.stdout,
        "PROBE   KIND  REFERENCE     SERIAL  POINT    SINCE\n\
         P-1042  ph    agcl-unknown  A1      retired  2026-03-05 10:00\n"
    );
}

#[test]
fn probes_that_cannot_be_are_refused_and_nothing_is_written() {
    let site = Site::with_probe();
    site.refused(
        "probe add P-1042 --kind ph",
        "error: probe `P-1042` is there already (ph, serial A1)\n  do:    give the new electrode a name of its own; a name is never used again\n",
    );
    site.refused(
        "probe add 'P 1' --kind ph",
        "error: `P 1` is no name for a probe\n  do:    write up to 64 characters without spaces, commas and semicolons\n",
    );
    site.refused(
        "probe add P-2 --kind ph --ph-iso 70",
        "error: an isopotential pH of 70 is outside 0 to 14\n  do:    leave `--ph-iso` out unless the maker states it; it is 7.00 then\n",
    );
    site.refused(
        "probe place P-9 --point POND-3",
        "error: no probe `P-9`\n  do:    name one of P-1042, or add it with `halfcell probe add`\n",
    );
    site.refused(
        "probe place P-1042 --point POND-9",
        "error: no point `POND-9`\n  where: site `Sable Creek Hatchery`\n  do:    name one of POND-3, POND-4, BASIN\n",
    );
    site.refused(
        "probe place P-1042 --point BASIN",
        "error: probe `P-1042` measures ph and point `BASIN` orp\n  do:    place an electrode of kind orp there\n",
    );
    site.refused(
        "probe place P-1042 --point POND-3",
        "error: probe `P-1042` sits at `POND-3` already at that time\n  do:    leave it as it is, or give the right `--at`\n",
    );
    site.done("probe retire P-1042");
    site.refused(
        "probe retire P-1042",
        "error: probe `P-1042` is retired at that time\n  do:    name an electrode in service; `halfcell probe list` shows them\n",
    );
}

#[test]
fn a_time_in_the_future_is_refused_by_every_command_that_records() {
    let site = Site::with_probe();
    let told = "lies 86399 s in the future";
    for line in [
        "probe add P-2 --kind ph",
        "probe place P-1042 --point POND-4",
        "probe retire P-1042",
        "lot add --kind phthalate --number L1",
        "calibrate --probe P-1042 --buffer 7,0,25",
        "verify --probe P-1042 --buffer 7,0,25",
        "grab --point POND-3 --value 7.0",
        "hold --point POND-3 --for 30m --why cleaning",
    ] {
        let before = site.events();
        let said = site.run(&format!("{line} --at 2999-01-01"));
        assert_eq!(said.code, 2, "{line}: {said:?}");
        assert!(
            said.stderr.starts_with("error: 2999-01-01 00:00 lies "),
            "{line}: {}",
            said.stderr
        );
        assert!(
            said.stderr.contains(" in the future\n"),
            "{line}: {} {told}",
            said.stderr
        );
        assert_eq!(site.events(), before, "{line}");
    }
}

#[test]
fn a_lot_carries_its_certificate_and_a_date_of_expiry_is_its_last_day() {
    let site = Site::new();
    site.done("lot add --kind phthalate --number L123 --expires 2026-06-30 --value 4.010@25 --value 4.002@20 --u 0.006");
    let book = site.book();
    let lot = &book.lot("L123").unwrap().fact;
    assert_eq!(lot.values, [[4.002, 20.0], [4.010, 25.0]]);
    // The first moment of July in Halifax, UTC-3 in summer.
    assert_eq!(lot.expires, Some(Timestamp::from_ms(1_782_874_800_000)));
    let listed = site.done("lot list --json").json();
    assert_eq!(
        listed,
        serde_json::json!({"lots": [{
            "number": "L123", "kind": "phthalate", "opened": null, "expires": "2026-07-01T03:00:00.000Z", "expired": true,
            "values": [{"value": 4.002, "temp_c": 20.0}, {"value": 4.010, "temp_c": 25.0}], "u": 0.006
        }]})
    );
    assert_eq!(
        site.done("lot list").stdout,
        "LOT   KIND       VALUES                         U (k=2)  OPENED  NOT FROM\n\
         L123  phthalate  4.002 at 20 °C, 4.01 at 25 °C  ± 0.006  -       expired 2026-07-01 00:00\n"
    );
}

#[test]
fn lots_that_cannot_be_are_refused_and_nothing_is_written() {
    let site = Site::new();
    site.done("lot add --kind phthalate --number L123");
    site.refused(
        "lot add --kind phosphate --number L123",
        "error: lot `L123` (phthalate) is there already\n  do:    check the number on the bottle; `--correct` replaces what was entered\n",
    );
    site.refused(
        "lot add --kind phthalate --number L9 --correct",
        "error: no lot `L9` to correct\n  do:    leave `--correct` out\n",
    );
    site.refused(
        "lot add --kind phtalate --number L2",
        "error: unknown buffer `phtalate`, and the lot states no value\n  do:    write one of tetroxalate, tartrate, citrate, phthalate, phosphate, phosphate-1-3.5, borax, carbonate, calcium-hydroxide, zobell, light, quinhydrone-4, quinhydrone-7, or give the certificate's values with --value VALUE@TEMP_C\n",
    );
    site.refused(
        "lot add --kind phthalate --number L2 --value 6.86@25",
        "error: 6.86 at 25 °C is no value of phthalate, which is pH 4.005 there\n  do:    check the kind and the certificate; a buffer of another composition takes a word of your own as --kind\n",
    );
    site.refused(
        "lot add --kind phthalate --number L2 --value 4,005@25",
        "error: `4,005` has a decimal comma\n  where: argument `--value <VALUE@TEMP_C>`\n  do:    write `4.005`\n",
    );
    site.refused(
        "lot add --kind phthalate --number L2 --value 4.00@25 --value 4.01@25",
        "error: two values at 25 °C\n  where: lot `L2`\n  do:    give one --value per temperature\n",
    );
    site.done("lot add --kind phosphate --number L123 --correct");
    assert_eq!(site.book().lot("L123").unwrap().fact.kind, "phosphate");
}

#[test]
fn a_grab_sample_has_a_point_a_value_and_an_uncertainty() {
    let site = Site::new();
    let said = site.done(
        "grab --point POND-3 --value 7.12 --u 0.03 --at '2026-03-02 09:14' --by 'M. Oake' --json",
    );
    let mut fact = said.json();
    assert!(fact["entered"].take().is_string());
    assert_eq!(
        fact,
        serde_json::json!({
            "event": 1, "at": "2026-03-02T13:14:00.000Z", "entered": null, "by": "M. Oake",
            "fact": {"event": "grab", "point": "POND-3", "value": 7.12, "u": 0.03}
        })
    );
    let said = site.done("grab --point BASIN --value -120.5");
    assert!(
        said.stdout
            .starts_with("grab sample of -120 ± 10 mV at `BASIN`\n  event 2, "),
        "{}",
        said.stdout
    );
    assert!(
        said.stdout.trim_end().ends_with(", by oake"),
        "the login name: {}",
        said.stdout
    );
    site.refused(
        "grab --point POND-3 --value 712",
        "error: a grab of 712 pH is outside -1 to 15 pH\n  where: point `POND-3`\n  do:    write the bench meter's value in pH\n",
    );
    site.refused(
        "grab --point POND-3 --value 7,12",
        "error: `7,12` has a decimal comma\n  where: argument `--value <PH_OR_MV>`\n  do:    write `7.12`\n",
    );
    site.refused(
        "grab --point POND-3 --value 7.12 --u 0",
        "error: an uncertainty of 0 cannot be\n  where: argument `--u <U>`\n  do:    write the expanded uncertainty (k = 2) of the certificate, above zero\n",
    );
}

#[test]
fn a_hold_ends_by_itself() {
    let site = Site::new();
    let said = site.done(
        "hold --point POND-3 --for 30m --why 'cleaning the electrode' --at '2026-03-02 09:14'",
    );
    assert!(
        said.stdout.starts_with("`POND-3` on hold until 2026-03-02 09:44\n  event 1, 2026-03-02 09:14, by oake, backdated: "),
        "{}",
        said.stdout
    );
    let pond = Tag::from("POND-3");
    let book = site.book();
    assert_eq!(
        book.hold_at(&pond, MARCH_2_0914).unwrap().fact.why,
        "cleaning the electrode"
    );
    assert!(
        book.hold_at(&pond, MARCH_2_0914.plus_ms(30 * 60_000))
            .is_none()
    );
    site.refused(
        "hold --point POND-3 --for 30 --why x",
        "error: `30` is no duration; write `500ms`, `90s`, `5m`, `2h`, `7d` or `1h30m`\n",
    );
    site.refused(
        "hold --point POND-3 --for 8d --why x",
        "error: a hold of 8d is not between 1s and 7d\n  do:    hold for as long as the work takes; it can be repeated\n",
    );
    site.refused(
        "hold --point POND-3 --for 30m --why ' '",
        "error: `--why` is empty\n  do:    say it in a few words\n",
    );
}
