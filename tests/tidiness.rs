//! Tidiness is a test: the import order, the places that may print or read, and what may not be left lying.

use std::fs;
use std::path::{Path, PathBuf};

/// Ground first (each imports ground only), then the stages in the order of the data.
const GROUND: &[&str] = &["diagnostics", "json", "math", "quantity", "source", "working"];
const STAGES: &[&str] = &[
    "spec",
    "plan",
    "data",
    "prior",
    "posterior",
    "questions",
    "checks",
    "sensitivity",
    "findings",
    "report",
    "stamp",
    "review",
    "cli",
];

fn sources() -> Vec<(String, PathBuf, String)> {
    let root = Path::new(env!("CARGO_MANIFEST_DIR")).join("src");
    let mut found = Vec::new();
    let mut folders = vec![root.clone()];
    while let Some(folder) = folders.pop() {
        for entry in fs::read_dir(&folder).expect("src is readable") {
            let path = entry.expect("an entry").path();
            if path.is_dir() {
                folders.push(path);
            } else if path.extension().is_some_and(|ending| ending == "rs") {
                let inside = path.strip_prefix(&root).expect("inside src");
                let stage = inside.iter().next().expect("a name").to_string_lossy().replace(".rs", "");
                found.push((stage, path.clone(), fs::read_to_string(&path).expect("UTF-8")));
            }
        }
    }
    found.sort_by(|a, b| a.1.cmp(&b.1));
    found
}

/// The file without its unit tests and without comments.
fn code(text: &str) -> String {
    let before_tests = text.split("\n#[cfg(test)]\nmod ").next().unwrap_or(text);
    before_tests.lines().filter(|line| !line.trim_start().starts_with("//")).collect::<Vec<_>>().join("\n")
}

fn is_test_file(path: &Path) -> bool {
    path.file_name().is_some_and(|name| {
        let name = name.to_string_lossy();
        name.ends_with("tests.rs") || name == "published.rs"
    }) || path.iter().any(|part| part == "tests")
}

#[test]
fn a_stage_imports_only_ground_and_earlier_stages() {
    let place = |name: &str| STAGES.iter().position(|stage| *stage == name);
    let mut wrong = Vec::new();
    for (stage, path, text) in sources() {
        if stage == "main" || stage == "lib" || is_test_file(&path) {
            continue;
        }
        for part in code(&text).split("crate::").skip(1) {
            let imported: String = part.chars().take_while(|c| c.is_alphanumeric() || *c == '_').collect();
            let allowed = if GROUND.contains(&stage.as_str()) {
                GROUND.contains(&imported.as_str())
            } else {
                GROUND.contains(&imported.as_str()) || place(&imported) <= place(&stage)
            };
            if !allowed {
                wrong.push(format!("{}: imports crate::{imported}", path.display()));
            }
        }
    }
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
}

#[test]
fn every_folder_of_the_crate_has_its_place_in_the_order() {
    for (stage, path, _) in sources() {
        let known = GROUND.contains(&stage.as_str()) || STAGES.contains(&stage.as_str());
        assert!(known || stage == "main" || stage == "lib", "{} has no place", path.display());
    }
}

/// Where a word may stand: everywhere but outside the places named, it is an error.
#[test]
fn words_stand_only_where_they_belong() {
    let rules: &[(&str, &[&str])] = &[
        ("libm::", &["math"]),
        ("statrs::", &["math"]),
        ("println!", &["cli"]),
        ("eprintln!", &["cli"]),
        ("print!(", &["cli"]),
        ("File::open", &["source"]),
        ("fs::read", &["source", "stamp"]),
        ("SystemTime", &["stamp", "cli"]),
        ("env::var", &[]),
        (".unwrap()", &[]),
        (".expect(\"", &[]),
        ("todo!(", &[]),
        ("unimplemented!(", &[]),
        ("dbg!(", &[]),
        ("#[allow(dead_code", &[]),
    ];
    let mut wrong = Vec::new();
    for (stage, path, text) in sources() {
        if is_test_file(&path) {
            continue;
        }
        for (word, places) in rules {
            if code(&text).contains(word) && !places.contains(&stage.as_str()) {
                wrong.push(format!("{}: {word}", path.display()));
            }
        }
    }
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
}

#[test]
fn no_file_outgrows_one_idea() {
    for (_, path, text) in sources() {
        let lines = text.lines().count();
        assert!(lines <= 700, "{} has {lines} lines: is it still one idea?", path.display());
    }
}
