//! Readings in and out: every good row once, every broken row named, the contract's columns.

use crate::harness::Site;
use serde_json::{Value, json};
use std::fmt::Write as _;

const ROWS: &str = "time,point,mv,temp_c\n\
    2026-03-02T13:14:01Z,POND-3,0,25.0\n\
    2026-03-02T13:14:00Z,POND-3,-177.48,25.0\n\
    2026-03-02T13:14:01Z,POND-3,0,25.0\n\
    1772457241000,BASIN,650.5,20.0\n\
    2026-03-02T13:14:02Z,POND-3,5,\n";

fn imported(rows: &str) -> (Site, Value, i32) {
    let site = Site::with_probe();
    site.done("calibrate --probe P-1042 --at '2026-03-01 10:00' --buffer 4,177.4776,25 --buffer 10,-177.4776,25");
    std::fs::write(site.path("rows.csv"), rows).unwrap();
    let said = site.run("import rows.csv --by 'M. Oake' --json");
    let (code, said) = (said.code, said.json());
    (site, said, code)
}

#[test]
fn rows_in_any_order_come_out_once_in_order_of_time_with_their_values() {
    let (site, said, code) = imported(ROWS);
    assert_eq!(code, 0);
    assert_eq!(
        said,
        json!({"file": "rows.csv", "kept": 4, "repeated": 1, "broken": 0, "conflicting": 0, "event": 4, "broken_rows": []})
    );
    let csv = site
        .done("export --point POND-3 --from 2026-03-02T13:14:00Z --to 2026-03-02T13:15:00Z")
        .stdout;
    let rows: Vec<&str> = csv.lines().collect();
    assert_eq!(
        rows[0],
        "time,point,mv,temp_c,value,u,flag,tests,probe,calibration,best,u_best"
    );
    let fields = |row: &str| row.split(',').map(str::to_owned).collect::<Vec<_>>();
    let first = fields(rows[1]);
    assert_eq!(
        first[..5],
        ["2026-03-02T13:14:00.000Z", "POND-3", "-177.48", "25", "10"]
    );
    assert!(first[5].parse::<f64>().unwrap() > 0.02);
    assert_eq!(first[6..], ["1", "", "P-1042", "3", "", ""]);
    assert!(
        rows[2].starts_with("2026-03-02T13:14:01.000Z,POND-3,0,25,7,"),
        "{}",
        rows[2]
    );
    let cold = fields(rows[3]);
    assert_eq!(cold[..4], ["2026-03-02T13:14:02.000Z", "POND-3", "5", ""]);
    assert_eq!(cold[4..8], ["", "", "4", "temperature"]);
    assert_eq!(rows.len(), 4);
}

#[test]
fn a_second_import_of_the_same_file_keeps_nothing() {
    let (site, _, _) = imported(ROWS);
    let (before, events) = (site.done("export").stdout, site.events());
    let again = site.done("import rows.csv --json").json();
    assert_eq!((&again["kept"], &again["repeated"]), (&json!(0), &json!(5)));
    assert_eq!(again["event"], Value::Null);
    assert_eq!(
        (site.done("export").stdout, site.events()),
        (before, events)
    );
}

#[test]
fn other_figures_at_the_same_time_are_kept_and_counted_as_conflicting() {
    let (site, _, _) = imported(ROWS);
    std::fs::write(
        site.path("more.csv"),
        "time,point,mv,temp_c\n2026-03-02T13:14:01Z,POND-3,1,25.0\n",
    )
    .unwrap();
    let said = site.done("import more.csv --json").json();
    assert_eq!(
        (&said["kept"], &said["conflicting"], &said["repeated"]),
        (&json!(1), &json!(1), &json!(0))
    );
    assert_eq!(site.done("export --point POND-3").stdout.lines().count(), 5);
}

#[test]
fn broken_rows_are_named_by_line_the_rest_is_kept_and_the_code_is_1() {
    let mut rows = ROWS.to_owned();
    for n in 0..25 {
        writeln!(rows, "2026-03-02T13:15:00Z,POND-9,{n},20").unwrap();
    }
    rows.push_str("2026-03-02T13:16:00Z,POND-3,3,25\n");
    let (site, said, code) = imported(&rows);
    assert_eq!(code, 1);
    assert_eq!((&said["kept"], &said["broken"]), (&json!(5), &json!(25)));
    assert_eq!(
        said["broken_rows"][0],
        json!({"line": 7, "why": "unknown point `POND-9`"})
    );
    let told = site.run("import rows.csv");
    let mut wanted: Vec<String> = (7..27)
        .map(|line| format!("line {line}: unknown point `POND-9`"))
        .collect();
    wanted.push("and 5 more broken rows".to_owned());
    wanted.push("error: 25 of 31 rows of rows.csv are broken; the rest is kept".to_owned());
    wanted.push(
        "  do:    mend the lines named and import the file again; rows already there are skipped"
            .to_owned(),
    );
    assert_eq!(told.stderr.lines().collect::<Vec<_>>(), wanted);
    assert_eq!(told.code, 1);
    assert!(
        told.stdout
            .starts_with("rows.csv: 0 rows kept, 6 already there, 25 broken, 0 conflicting\n"),
        "{}",
        told.stdout
    );
}

#[test]
fn a_file_that_is_not_there_or_has_another_header_writes_nothing() {
    let site = Site::new();
    std::fs::write(site.path("semi.csv"), "time;point;mv;temp_c\n1;2;3;4\n").unwrap();
    site.refused(
        "import semi.csv",
        "error: column `time` is missing\n  where: header `time;point;mv;temp_c`\n  do:    write a first line `time,point,mv,temp_c`, columns in any order, commas between\n",
    );
    site.refused(
        "import absent.csv",
        "error: cannot read absent.csv: No such file or directory (os error 2)\n  do:    name a CSV file\n",
    );
}

#[test]
fn what_was_exported_can_be_imported_elsewhere() {
    let (site, _, _) = imported("time,point,mv,temp_c\n2026-03-02T13:14:01Z,POND-3,0.125,25.5\n");
    site.done("export -o out.csv");
    let other = Site::new();
    std::fs::copy(site.path("out.csv"), other.path("out.csv")).unwrap();
    let said = other.done("import out.csv");
    assert_eq!(
        said.stderr,
        "columns not read: value, u, flag, tests, probe, calibration, best, u_best\n"
    );
    let row = other.done("export --format jsonl").stdout;
    let row: Value = serde_json::from_str(&row).unwrap();
    assert_eq!(
        row,
        json!({
            "time": "2026-03-02T13:14:01.000Z", "point": "POND-3", "mv": 0.125, "temp_c": 25.5, "value": null, "u": null,
            "flag": 4, "tests": ["no-calibration"], "probe": null, "calibration": null, "best": null, "u_best": null
        })
    );
}

#[test]
fn an_export_across_hours_and_points_has_every_row_once() {
    let mut rows = "time,point,mv,temp_c\n".to_owned();
    let start = 1_772_450_000_000_i64;
    for n in 0..500 {
        let (at, point) = (
            start + n * 60_000,
            if n % 2 == 0 { "POND-3" } else { "BASIN" },
        );
        writeln!(rows, "{at},{point},{n},20").unwrap();
    }
    let (site, said, _) = imported(&rows);
    assert_eq!(said["kept"], 500);
    let out = site.done("export --format csv").stdout;
    let mut figures: Vec<u32> = out
        .lines()
        .skip(1)
        .map(|row| row.split(',').nth(2).unwrap().parse().unwrap())
        .collect();
    figures.sort_unstable();
    assert_eq!(figures, (0..500).collect::<Vec<u32>>());
    let pond = site.done("export --point POND-3 --point BASIN --from 2026-03-02T11:13:20Z --to 2026-03-02T11:15:20Z").stdout;
    assert_eq!(pond.lines().count(), 3, "from is inside, to is not: {pond}");
}
