//! The walls of the house: which room may name which, what stands at the top, what may not stand in the code.

#![expect(
    clippy::unwrap_used,
    reason = "a test that cannot read the sources has failed"
)]

use std::fs;
use std::path::{Path, PathBuf};

/// What each room may name, besides itself. What is not listed is forbidden, not forgotten.
const MAY_NAME: &[(&str, &[&str])] = &[
    ("electrode", &[]),
    ("water", &["electrode"]),
    ("watch", &["electrode"]),
    ("config", &["electrode", "watch"]),
    ("meters", &["config", "electrode"]),
    ("ledger", &["electrode", "watch"]),
    ("pipeline", &["electrode", "water", "watch", "config"]),
    ("bench", &["electrode"]),
    ("simulation", &["electrode", "config"]),
    (
        "daemon",
        &[
            "electrode",
            "water",
            "watch",
            "config",
            "meters",
            "ledger",
            "pipeline",
            "outlets",
            "page",
        ],
    ),
    ("outlets", &["ledger", "config", "electrode", "watch"]),
    ("page", &["ledger", "config", "electrode", "watch"]),
    (
        "report",
        &["ledger", "watch", "water", "electrode", "config"],
    ),
    (
        "cli",
        &[
            "electrode",
            "water",
            "watch",
            "config",
            "meters",
            "ledger",
            "pipeline",
            "bench",
            "simulation",
            "daemon",
            "outlets",
            "page",
            "report",
        ],
    ),
];

/// Everything that may stand at the top, besides dot files and folders.
const TOP: &[&str] = &[
    "Cargo.toml",
    "Cargo.lock",
    "README.md",
    "DEVELOPERS.md",
    "src",
    "config",
    "migrations",
    "tests",
    "systemd",
    "benches",
    "fuzz",
    "target",
];

fn root() -> &'static Path {
    Path::new(env!("CARGO_MANIFEST_DIR"))
}

fn sources(folder: &Path) -> Vec<PathBuf> {
    let mut found = Vec::new();
    let mut folders = vec![folder.to_path_buf()];
    while let Some(folder) = folders.pop() {
        for entry in fs::read_dir(&folder).unwrap() {
            let path = entry.unwrap().path();
            if path.is_dir() {
                folders.push(path);
            } else if path.extension().is_some_and(|e| e == "rs") {
                found.push(path);
            }
        }
    }
    found.sort();
    found
}

/// The file without comments, with its tests cut off when asked.
fn code(path: &Path, tests_too: bool) -> String {
    let text = fs::read_to_string(path).unwrap();
    let text = if tests_too {
        text.as_str()
    } else {
        text.split("#[cfg(test)]").next().unwrap()
    };
    let kept: Vec<&str> = text
        .lines()
        .filter(|l| !l.trim_start().starts_with("//"))
        .collect();
    kept.join("\n")
}

fn room_of(path: &Path) -> String {
    let inside = path.strip_prefix(root().join("src")).unwrap();
    let first = inside
        .components()
        .next()
        .unwrap()
        .as_os_str()
        .to_string_lossy()
        .into_owned();
    first.trim_end_matches(".rs").to_owned()
}

#[test]
fn rooms_name_only_the_rooms_they_may() {
    let mut broken = Vec::new();
    for path in sources(&root().join("src")) {
        let room = room_of(&path);
        if room == "lib" || room == "main" {
            continue;
        }
        let allowed = MAY_NAME
            .iter()
            .find(|(name, _)| *name == room)
            .map(|(_, allowed)| *allowed);
        let Some(allowed) = allowed else {
            broken.push(format!(
                "{}: room `{room}` stands in no list",
                path.display()
            ));
            continue;
        };
        let text = code(&path, true);
        if text.contains("use crate::{") {
            broken.push(format!(
                "{}: one `use crate::room::…` per room, please",
                path.display()
            ));
        }
        for part in text.split("crate::").skip(1) {
            let named: String = part
                .chars()
                .take_while(|c| c.is_alphanumeric() || *c == '_')
                .collect();
            if named != room && !allowed.contains(&named.as_str()) {
                broken.push(format!("{}: {room} may not name {named}", path.display()));
            }
        }
    }
    assert!(broken.is_empty(), "{}", broken.join("\n"));
}

#[test]
fn science_rooms_know_no_clock_no_file_and_no_log() {
    let banned = [
        "std::fs",
        "std::net",
        "SystemTime",
        "Instant::now",
        "tokio",
        "chrono",
        "rusqlite",
        "tracing",
        "println!",
    ];
    let mut broken = Vec::new();
    for room in ["electrode", "water", "watch", "pipeline", "bench"] {
        let folder = root().join("src").join(room);
        if !folder.exists() {
            continue;
        }
        for path in sources(&folder) {
            let text = code(&path, false);
            for word in banned.iter().filter(|word| text.contains(*word)) {
                broken.push(format!("{}: names `{word}`", path.display()));
            }
        }
    }
    assert!(broken.is_empty(), "{}", broken.join("\n"));
}

#[test]
fn sql_stands_only_in_the_ledger() {
    let mut broken = Vec::new();
    for path in sources(&root().join("src")) {
        let text = code(&path, false);
        let sql = [
            "rusqlite",
            "\"SELECT ",
            "\"INSERT ",
            "\"UPDATE ",
            "\"DELETE ",
        ]
        .iter()
        .any(|word| text.contains(word));
        if sql && room_of(&path) != "ledger" {
            broken.push(path.display().to_string());
        }
    }
    assert!(
        broken.is_empty(),
        "SQL outside src/ledger: {}",
        broken.join(", ")
    );
}

#[test]
fn nothing_else_stands_at_the_top() {
    for entry in fs::read_dir(root()).unwrap() {
        let name = entry.unwrap().file_name().into_string().unwrap();
        assert!(
            name.starts_with('.') || TOP.contains(&name.as_str()),
            "`{name}` has no place at the top level"
        );
    }
}

#[test]
fn nothing_is_left_for_later_in_the_code() {
    let words = [
        concat!("TO", "DO"),
        concat!("FIX", "ME"),
        concat!("todo", "!("),
        concat!("unimplemented", "!("),
    ];
    for folder in ["src", "tests"] {
        for path in sources(&root().join(folder)) {
            let text = fs::read_to_string(&path).unwrap();
            for word in words {
                assert!(!text.contains(word), "{}: `{word}`", path.display());
            }
        }
    }
}

#[test]
fn migration_numbers_rise_by_one() {
    let mut names: Vec<String> = fs::read_dir(root().join("migrations"))
        .unwrap()
        .map(|entry| entry.unwrap().file_name().into_string().unwrap())
        .collect();
    names.sort();
    for (number, name) in (1..).zip(&names) {
        assert!(
            name.starts_with(&format!("{number:04}-"))
                && Path::new(name).extension().is_some_and(|e| e == "sql"),
            "`{name}` stands where `{number:04}-what-it-does.sql` belongs"
        );
    }
    assert!(!names.is_empty());
}
