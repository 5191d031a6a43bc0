//! Exit codes, configuration, ledgers that cannot be used, and a reader who leaves early.

use crate::harness::{Said, Site};
use std::fmt::Write as _;
use std::process::Stdio;

#[test]
fn help_is_done_and_a_typing_error_is_2() {
    let site = Site::new();
    for line in [
        "--help",
        "calibrate --help",
        "probe add --help",
        "--version",
    ] {
        let said = site.done(line);
        assert_eq!(said.stderr, "", "{line}");
    }
    for line in [
        "",
        "statsu",
        "status --at",
        "probe",
        "probe add",
        "export --format xml",
        "calibrate --probe P-1",
    ] {
        let said = site.run(line);
        assert_eq!((said.code, said.stdout.as_str()), (2, ""), "{line}");
    }
    assert!(
        site.run("statsu").stderr.contains("status"),
        "the nearest command is named"
    );
}

#[test]
fn a_word_that_names_nothing_is_answered_with_those_that_do() {
    let said = Site::new().run("probe add P-1 --kind glass");
    assert_eq!(said.code, 2);
    assert!(
        said.stderr
            .contains("unknown kind of probe `glass`; known are ph, orp"),
        "{}",
        said.stderr
    );
}

#[test]
fn a_configuration_is_checked_and_shown_place_by_place() {
    let site = Site::new();
    let said = site.done("config check halfcell.toml");
    assert_eq!(
        said.stdout,
        "halfcell.toml is good: 1 line, 1 meter, 3 points\n"
    );
    let text = std::fs::read_to_string(site.path("halfcell.toml")).unwrap();
    let wrong = text
        .replacen("quantity    = \"ph\"", "quantity    = \"pH\"", 1)
        .replacen("pond-usb\"\npattern", "pond-usv\"\npattern", 1);
    std::fs::write(site.path("wrong.toml"), wrong).unwrap();
    let said = site.run("config check wrong.toml");
    assert_eq!(said.code, 2, "{said:?}");
    assert!(said.stderr.contains("wrong.toml:"), "{}", said.stderr);
    assert!(
        said.stderr.ends_with("error: wrong.toml has 2 problems\n"),
        "{}",
        said.stderr
    );
    let json = site.run("config check wrong.toml --json");
    assert_eq!(json.code, 2);
    let json = json.json();
    assert_eq!(json["good"], false);
    assert_eq!(json["problems"].as_array().unwrap().len(), 2);
    let said = site.run("--config wrong.toml status");
    assert_eq!(said.code, 2);
    assert!(
        said.stderr.ends_with("error: wrong.toml has 2 problems\n"),
        "{}",
        said.stderr
    );
}

#[test]
fn a_configuration_that_is_no_text_is_refused_with_its_line() {
    let site = Site::new();
    std::fs::write(site.path("latin.toml"), b"[site]\nname = \"\xb0\"").unwrap();
    let said = site.run("config check latin.toml");
    assert_eq!(said.code, 2);
    assert_eq!(
        said.stderr,
        "error: the configuration latin.toml is not UTF-8\n  where: line 2\n  do:    save it as UTF-8 text\n"
    );
}

#[test]
fn every_configuration_that_comes_with_the_program_is_good() {
    let folder = concat!(env!("CARGO_MANIFEST_DIR"), "/config");
    let site = Site::new();
    let mut checked = 0;
    for entry in std::fs::read_dir(folder).unwrap() {
        let path = entry.unwrap().path();
        if path.extension().is_some_and(|e| e == "toml") {
            site.done(&format!("config check '{}'", path.display()));
            checked += 1;
        }
    }
    assert!(checked > 0, "no example in {folder}");
}

#[test]
fn a_configuration_that_is_not_there_is_a_wrong_request() {
    let site = Site::new();
    let said = site.run("--config absent.toml status");
    assert_eq!(
        said.stderr,
        "error: cannot read the configuration absent.toml: No such file or directory (os error 2)\n  \
         do:    name the site's file with --config or in HALFCELL_CONFIG\n"
    );
    assert_eq!(said.code, 2);
}

#[test]
fn before_there_is_a_ledger_status_says_so_with_3() {
    let site = Site::new();
    for line in ["status", "health", "export", "audit", "probe list"] {
        let said = site.run(line);
        assert_eq!(said.code, 3, "{line}: {said:?}");
        assert_eq!(
            said.stderr,
            site.filled(
                "error: there is no ledger at FOLDER/site.db\n  do:    start the daemon once, or name the ledger with `--ledger FILE`\n"
            ),
            "{line}"
        );
    }
    assert!(!site.path("site.db").exists(), "reading makes no ledger");
}

#[test]
fn a_file_that_is_no_ledger_is_said_so_with_3() {
    let site = Site::new();
    std::fs::write(
        site.path("site.db"),
        "this is a shopping list and no ledger of anything, however long it is",
    )
    .unwrap();
    for line in ["status", "grab --point POND-3 --value 7.1"] {
        let said = site.run(line);
        assert_eq!(said.code, 3, "{line}: {said:?}");
        assert!(said.stderr.starts_with("error: "), "{}", said.stderr);
        assert!(said.stderr.contains("site.db"), "{}", said.stderr);
    }
}

#[test]
fn a_ledger_from_a_newer_version_is_said_so_with_3() {
    let site = Site::with_probe();
    let connection = rusqlite::Connection::open(site.path("site.db")).unwrap();
    connection.pragma_update(None, "user_version", 99).unwrap();
    drop(connection);
    for line in ["status", "grab --point POND-3 --value 7.1"] {
        let said = site.run(line);
        assert_eq!(said.code, 3, "{line}: {said:?}");
        assert!(
            said.stderr.starts_with(&site.filled(
                "error: ledger FOLDER/site.db is of version 99; this program knows versions up to "
            )),
            "{}",
            said.stderr
        );
        assert!(
            said.stderr.contains(
                "\n  do:    install the version of halfcell that wrote it, or a newer one\n"
            ),
            "{}",
            said.stderr
        );
    }
}

#[test]
fn an_audit_of_a_ledger_with_a_changed_event_ends_with_1_and_says_which() {
    let site = Site::with_probe();
    let connection = rusqlite::Connection::open(site.path("site.db")).unwrap();
    connection
        .execute_batch("DROP TRIGGER event_is_not_changed; UPDATE event SET by = 'somebody else' WHERE id = 1;")
        .unwrap();
    drop(connection);
    let said = site.run("audit");
    assert_eq!(said.code, 1, "{said:?}");
    assert!(
        said.stderr
            .starts_with("error: the ledger is not sound: event 1 is not as it was recorded"),
        "{}",
        said.stderr
    );
    let json = site.run("audit --json");
    assert_eq!((json.code, &json.json()["sound"]), (1, &false.into()));
}

#[test]
fn audit_finds_a_sound_ledger_sound_and_needs_no_configuration_for_a_named_one() {
    let site = Site::with_probe();
    let said = site.done("audit");
    assert!(
        said.stdout.starts_with("sound: 2 events"),
        "{}",
        said.stdout
    );
    let json = site
        .done("--config absent.toml audit --ledger site.db --json")
        .json();
    assert_eq!((&json["sound"], &json["events"]), (&true.into(), &2.into()));
}

#[test]
fn a_reader_who_leaves_early_is_no_failure() {
    let site = Site::with_probe();
    let mut rows = "time,point,mv,temp_c\n".to_owned();
    for n in 0..20_000_i64 {
        let at = 1_772_450_000_000 + n * 1000;
        writeln!(rows, "{at},POND-3,{n}.5,20").unwrap();
    }
    std::fs::write(site.path("rows.csv"), rows).unwrap();
    site.done("import rows.csv");
    for format in ["csv", "jsonl"] {
        let mut child = site
            .command()
            .args(["export", "--format", format])
            .stdout(Stdio::piped())
            .stderr(Stdio::piped())
            .spawn()
            .unwrap();
        drop(child.stdout.take());
        let said = Said::from(child.wait_with_output().unwrap());
        assert_eq!((said.code, said.stderr.as_str()), (0, ""), "{format}");
    }
}

#[test]
fn the_ledger_option_wins_over_the_configuration() {
    let site = Site::new();
    site.done("probe add P-1 --kind ph --ledger other.db");
    assert!(!site.path("site.db").exists());
    let listed = site.done("--ledger other.db --json probe list").json();
    assert_eq!(listed["probes"][0]["probe"], "P-1");
}
