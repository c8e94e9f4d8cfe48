//! The list of README.md against the cases and the tests.

use super::cases;
use std::fs;
use std::path::{Path, PathBuf};

/// A row of the list: case, source, test, and what is not covered or why nothing is.
struct Row {
    id: String,
    test: String,
    rest: String,
}

fn readme() -> String {
    fs::read_to_string(Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/published/README.md"))
        .expect("the list")
}

fn rows(text: &str) -> Vec<Row> {
    let cells = |line: &str| line.trim_matches('|').split('|').map(|cell| cell.trim().to_owned()).collect();
    text.lines()
        .filter(|line| line.starts_with("| `"))
        .map(|line| {
            let cells: Vec<String> = cells(line);
            let [id, _source, test, rest] = &cells[..] else { panic!("four cells: {line}") };
            let plain = |text: &String| text.trim_matches('`').to_owned();
            Row { id: plain(id), test: plain(test), rest: rest.clone() }
        })
        .collect()
}

fn sources() -> Vec<(String, String)> {
    let mut found = Vec::new();
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let mut folders: Vec<PathBuf> = vec![root.join("src"), root.join("tests")];
    while let Some(folder) = folders.pop() {
        for entry in fs::read_dir(folder).expect("a folder") {
            let path = entry.expect("an entry").path();
            if path.is_dir() {
                folders.push(path);
            } else if path.extension().is_some_and(|ending| ending == "rs") {
                let name = path.strip_prefix(root).expect("inside").to_string_lossy().into_owned();
                found.push((name, fs::read_to_string(&path).expect("text")));
            }
        }
    }
    found
}

#[test]
fn the_list_names_every_case_once_and_a_test_that_exists() {
    let text = readme();
    let rows = rows(&text);
    let listed: Vec<&str> = rows.iter().map(|row| row.id.as_str()).collect();
    let wanted: Vec<&str> = cases().iter().map(|case| case.id.as_str()).collect();
    assert_eq!(listed, wanted, "in the order of cases.json, none missing, none twice");
    let sources = sources();
    for row in &rows {
        if row.test == "none" {
            assert!(!row.rest.is_empty(), "{} needs a reason", row.id);
            continue;
        }
        let (file, test) = row.test.split_once(": ").unwrap_or_else(|| panic!("{}: file and test", row.id));
        let (_, code) =
            sources.iter().find(|(name, _)| name == file).unwrap_or_else(|| panic!("no file {file}"));
        let start =
            code.find(&format!("\nfn {test}()")).unwrap_or_else(|| panic!("no test {test} in {file}"));
        // The case, or the beginning of its id that takes in a group, stands in the test.
        let body = &code[start..];
        let body = &body[..body.find("\n}\n").unwrap_or(body.len())];
        let words = body.split('"').skip(1).step_by(2);
        let named = words
            .filter(|word| word.len() > 6)
            .any(|word| row.id.starts_with(word.split('{').next().unwrap_or(word)));
        assert!(named || !file.starts_with("tests/published"), "{} is not named in {test}", row.id);
    }
}

#[test]
fn the_counts_of_the_list_agree() {
    let text = readme();
    let rows = rows(&text);
    let covered = rows.iter().filter(|row| row.test != "none" && row.rest.is_empty()).count();
    let partly = rows.iter().filter(|row| row.test != "none" && !row.rest.is_empty()).count();
    let without = rows.iter().filter(|row| row.test == "none").count();
    let said =
        format!("{} cases: {covered} covered, {partly} covered in part, {without} not covered", rows.len());
    assert!(text.contains(&said), "the list should say: {said}");
}
