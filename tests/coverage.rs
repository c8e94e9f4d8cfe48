//! Nothing is left out: every kind of question, prior and within sd has an example, a golden case and a faulty
//! spec; and the lists of needs and questions name specs that exist, number by number.

use reassay::{prior, questions};
use std::collections::BTreeMap;
use std::fs;
use std::path::{Path, PathBuf};

fn root() -> PathBuf {
    PathBuf::from(env!("CARGO_MANIFEST_DIR"))
}

/// Name and text of every spec below a folder.
fn specs(folder: &str) -> BTreeMap<String, String> {
    let mut found = BTreeMap::new();
    let mut folders = vec![root().join(folder)];
    while let Some(folder) = folders.pop() {
        for entry in fs::read_dir(folder).expect("a folder").flatten() {
            let path = entry.path();
            if path.is_dir() {
                folders.push(path);
            } else if path.extension().is_some_and(|ending| ending == "toml") {
                let name = path.file_name().expect("a name").to_string_lossy().into_owned();
                let name = if name == "spec.toml" { parent_of(&path) } else { name };
                found.insert(name, fs::read_to_string(&path).unwrap_or_default());
            }
        }
    }
    found
}

fn parent_of(path: &Path) -> String {
    path.parent()
        .and_then(Path::file_name)
        .map_or_else(String::new, |name| name.to_string_lossy().into_owned())
}

/// What must be found: a table, and the key and value that stand in it.
fn wanted() -> Vec<(&'static str, &'static str, &'static str)> {
    let mut wanted: Vec<(&str, &str, &str)> =
        questions::ALL.iter().map(|kind| ("question", "ask", kind.ask)).collect();
    wanted.extend(prior::ALL.iter().map(|kind| ("prior", "from", kind.from)));
    wanted.extend(
        ["stated", "history", "readings", "peers", "carried", "none"].map(|from| ("within", "from", from)),
    );
    wanted.extend(
        ["uniform", "half-normal", "half-cauchy", "none", "reml", "moments"]
            .map(|law| ("prior", "between", law)),
    );
    wanted
}

/// Whether a table of that name says so, as a section or in short form.
fn says(text: &str, table: &str, key: &str, value: &str) -> bool {
    let mut section = String::new();
    for line in text.lines() {
        let line = line.trim();
        if line.starts_with('[') {
            section = line.trim_matches(['[', ']']).to_string();
        }
        let tight: String =
            line.split_whitespace().collect::<Vec<_>>().join(" ").replace(" =", "=").replace("= ", "=");
        let inside =
            section == table || tight.contains(&format!("{table}={{")) || tight.contains("otherwise={");
        if inside && tight.contains(&format!("{key}=\"{value}\"")) {
            return true;
        }
    }
    false
}

fn missing_in(texts: &BTreeMap<String, String>) -> Vec<String> {
    wanted()
        .into_iter()
        .filter(|(table, key, value)| !texts.values().any(|text| says(text, table, key, value)))
        .map(|(table, key, value)| format!("[{table}] {key} = \"{value}\""))
        .collect()
}

#[test]
fn every_kind_has_an_example() {
    assert_eq!(missing_in(&specs("specs")), Vec::<String>::new());
}

#[test]
fn every_kind_has_a_golden_case() {
    let mut cased = specs("specs");
    cased.retain(|name, _| root().join("tests/cases").join(name.trim_end_matches(".toml")).is_dir());
    assert_eq!(missing_in(&cased), Vec::<String>::new());
}

#[test]
fn every_kind_has_a_faulty_spec() {
    assert_eq!(missing_in(&specs("tests/faults")), Vec::<String>::new());
}

#[test]
fn the_lists_of_needs_and_questions_leave_no_number_out_and_name_specs_that_exist() {
    let text = fs::read_to_string(root().join("specs/COVERAGE.md")).expect("the lists");
    let known = specs("specs");
    let mut numbers: Vec<Vec<u32>> = Vec::new();
    for line in text.lines() {
        if line.starts_with("## ") {
            numbers.push(Vec::new());
        }
        let first = line.trim_start_matches("| ").split(' ').next().unwrap_or_default();
        if let (true, Ok(number), Some(list)) = (line.starts_with("| "), first.parse(), numbers.last_mut()) {
            list.push(number);
            let named: Vec<&str> = line.split('`').filter(|part| part.ends_with(".toml")).collect();
            assert!(!named.is_empty() || line.contains("handover.json"), "no spec is named: {line}");
            for name in named {
                assert!(known.contains_key(name), "{name} does not exist: {line}");
            }
        }
    }
    assert_eq!(numbers, [(1..=42).collect::<Vec<u32>>(), (1..=32).collect()]);
}
