//! The sources keep the house in order: which room may name which, what a pure room may not know,
//! how long a file may be, and how migrations are written.

use std::collections::{BTreeMap, BTreeSet};
use std::fs;
use std::path::{Path, PathBuf};

/// Rooms whose code does no I/O and reads no clock, log or environment.
const PURE: [&str; 13] = [
    "linalg",
    "dist",
    "random",
    "time",
    "finding",
    "series",
    "estimate",
    "constraint",
    "intake",
    "preparation",
    "study",
    "document",
    "estimation",
];

/// What a pure room may not name.
const IMPURE: [&str; 10] = [
    "tokio",
    "sqlx",
    "actix_web",
    "reqwest",
    "tracing",
    "std::fs",
    "std::env",
    "std::net",
    "std::process",
    "std::time::SystemTime",
];

const LONGEST: usize = 600;

/// The rooms that each room may import; `None`: all of them.
fn allowed(room: &str) -> Option<Vec<&'static str>> {
    let series = ["time", "finding", "linalg", "dist", "series"];
    let and_series = |more: &[&'static str]| Some([&series[..], more].concat());
    match room {
        "linalg" | "dist" | "random" | "time" => Some(vec![]),
        "finding" => Some(vec!["time"]),
        "document" => Some(vec!["finding"]),
        "series" => Some(vec!["time", "finding", "linalg", "dist"]),
        "estimate" => Some(vec!["linalg", "dist", "random", "finding"]),
        "constraint" => and_series(&["random", "estimate"]),
        "intake" => Some(vec!["series", "finding", "time"]),
        "preparation" => and_series(&[]),
        "estimation" => and_series(&["random", "estimate", "document"]),
        "study" => and_series(&["random", "estimate", "constraint", "document"]),
        "store" => Some(PURE.to_vec()),
        "service" => Some([&PURE[..], &["store", "clock"]].concat()),
        // Of `intake` only what describes kinds and layouts; the rest is for `service`.
        "http" => Some([&PURE[..], &["service"]].concat()),
        "cli" | "config" | "telemetry" | "clock" | "demo" | "main" => None,
        _ => panic!("room '{room}' is not in the table of rooms: add it here and in DEVELOPERS.md"),
    }
}

fn root() -> PathBuf {
    PathBuf::from(env!("CARGO_MANIFEST_DIR"))
}

fn files_under(folder: &Path, extension: &str) -> Vec<PathBuf> {
    let mut found = Vec::new();
    let mut waiting = vec![folder.to_owned()];
    while let Some(folder) = waiting.pop() {
        for entry in fs::read_dir(&folder).unwrap() {
            let path = entry.unwrap().path();
            if path.is_dir() {
                waiting.push(path);
            } else if path.extension().is_some_and(|e| e == extension) {
                found.push(path);
            }
        }
    }
    found.sort();
    assert!(!found.is_empty(), "no .{extension} file under {folder:?}");
    found
}

/// The room of a source file: its first folder or its own name.
fn room(path: &Path) -> String {
    let inner = path.strip_prefix(root().join("src")).unwrap();
    let first = inner.components().next().unwrap().as_os_str();
    let name = first.to_str().unwrap();
    name.strip_suffix(".rs").unwrap_or(name).to_owned()
}

/// Whether a file of the sources holds unit tests alone: in a folder `tests`, or named so.
fn is_test(path: &Path) -> bool {
    let inner = path.strip_prefix(root()).unwrap();
    let stem = path.file_stem().and_then(|s| s.to_str()).unwrap();
    stem == "tests" || stem.ends_with("_tests") || inner.iter().any(|part| part == "tests")
}

/// The code of a file without comments and without its unit tests, which may use more.
fn code(path: &Path) -> String {
    let text = fs::read_to_string(path).unwrap();
    let text = text.split("#[cfg(test)]\nmod tests {").next().unwrap();
    let without = |line: &str| line.split("//").next().unwrap().to_owned();
    text.lines().map(without).collect::<Vec<_>>().join("\n")
}

/// Rooms named after `crate::`, one by one or in braces.
fn imports(code: &str) -> BTreeSet<String> {
    let word = |text: &str| -> String {
        text.chars()
            .take_while(|c| c.is_ascii_alphanumeric() || *c == '_')
            .collect()
    };
    let mut found = BTreeSet::new();
    for rest in code.split("crate::").skip(1) {
        let Some(inner) = rest.strip_prefix('{') else {
            found.insert(word(rest));
            continue;
        };
        // The first name of each member at the outermost level of the braces.
        let (mut depth, mut fresh) = (0, true);
        for (i, c) in inner.char_indices() {
            match c {
                '{' => depth += 1,
                '}' if depth == 0 => break,
                '}' => depth -= 1,
                ',' if depth == 0 => fresh = true,
                c if fresh && !c.is_whitespace() => {
                    found.insert(word(&inner[i..]));
                    fresh = false;
                }
                _ => {}
            }
        }
    }
    found
}

#[test]
fn imports_are_read_in_every_form() {
    let code = "use crate::time::Period;\nuse crate::{dist, series::{Unit, key}};\nlet x = crate::store::y();";
    let found: Vec<String> = imports(code).into_iter().collect();
    assert_eq!(found, ["dist", "series", "store", "time"]);
}

#[test]
fn rooms_import_only_what_the_table_allows() {
    let mut wrong = Vec::new();
    for path in files_under(&root().join("src"), "rs") {
        let room = room(&path);
        if room == "lib" || is_test(&path) {
            continue;
        }
        let Some(allowed) = allowed(&room) else {
            continue;
        };
        let code = code(&path);
        for import in imports(&code) {
            if import != room && !allowed.contains(&import.as_str()) {
                wrong.push(format!("{}: {room} -> {import}", path.display()));
            }
        }
    }
    assert!(wrong.is_empty(), "forbidden arrows:\n{}", wrong.join("\n"));
}

#[test]
fn pure_rooms_know_no_world() {
    let mut wrong = Vec::new();
    for path in files_under(&root().join("src"), "rs") {
        let room = room(&path);
        if !PURE.contains(&room.as_str()) || is_test(&path) {
            continue;
        }
        let code = code(&path);
        let calendar = (room != "time").then_some("chrono");
        for name in IMPURE.into_iter().chain(calendar) {
            if names(&code, name) {
                wrong.push(format!("{}: {name}", path.display()));
            }
        }
    }
    assert!(
        wrong.is_empty(),
        "pure rooms that are not:\n{}",
        wrong.join("\n")
    );
}

/// Whether code names a path as such, not as part of a longer word.
fn names(code: &str, path: &str) -> bool {
    let inside = |c: char| c.is_ascii_alphanumeric() || c == '_';
    code.match_indices(path)
        .any(|(i, _)| !code[..i].ends_with(inside) && !code[i + path.len()..].starts_with(inside))
}

#[test]
fn only_the_store_names_the_database_library() {
    for path in files_under(&root().join("src"), "rs") {
        if room(&path) != "store" && !is_test(&path) {
            assert!(
                !code(&path).contains("sqlx::"),
                "{} names sqlx",
                path.display()
            );
        }
    }
}

#[test]
fn no_file_is_too_long_to_read() {
    let mut long = BTreeMap::new();
    for folder in ["src", "tests"] {
        for path in files_under(&root().join(folder), "rs") {
            let lines = fs::read_to_string(&path).unwrap().lines().count();
            if lines > LONGEST {
                long.insert(path, lines);
            }
        }
    }
    assert!(long.is_empty(), "longer than {LONGEST} lines: {long:?}");
}

#[test]
fn migrations_say_what_they_do_and_name_their_constraints() {
    for path in files_under(&root().join("migrations"), "sql") {
        let text = fs::read_to_string(&path).unwrap();
        assert!(
            text.starts_with("--"),
            "{}: begins without a comment",
            path.display()
        );
        let bare: Vec<String> = text
            .lines()
            .map(|line| line.split("--").next().unwrap().to_uppercase())
            .collect();
        for (i, line) in bare.iter().enumerate() {
            // A constraint may stand on the line after its name.
            let before = if i > 0 { bare[i - 1].as_str() } else { "" };
            for kind in [
                "PRIMARY KEY",
                "REFERENCES",
                "FOREIGN KEY",
                "CHECK (",
                "UNIQUE (",
                "EXCLUDE ",
            ] {
                let named =
                    line.contains("CONSTRAINT ") || before.trim().starts_with("CONSTRAINT ");
                let index = line.contains("CREATE UNIQUE INDEX ");
                assert!(
                    !line.contains(kind) || named || index,
                    "{}:{}: a constraint without a name: {}",
                    path.display(),
                    i + 1,
                    line.trim()
                );
            }
        }
    }
}
