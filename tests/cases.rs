//! Golden cases: a spec of `specs/` and the files that its review must hold, byte for byte. They pin wording and
//! bytes, not truth: the figures are held against published and high-precision values elsewhere.
//! `REASSAY_ACCEPT=1 cargo test cases` writes them again, to be read by eye.

use std::fs;
use std::path::{Path, PathBuf};
use std::process::Command;

const FILES: [&str; 3] = ["answers.json", "plan.toml", "report.md"];

/// A copy of the examples, so that a review which is carried from another finds it beside the specs.
fn desk(root: &Path) -> PathBuf {
    let desk = Path::new(env!("CARGO_TARGET_TMPDIR")).join("cases");
    let _ = fs::remove_dir_all(&desk);
    for folder in ["specs", "specs/shared", "demo-data"] {
        fs::create_dir_all(desk.join(folder)).expect("a folder");
        for entry in fs::read_dir(root.join(folder)).expect("the examples").flatten() {
            if entry.path().is_file() {
                fs::copy(entry.path(), desk.join(folder).join(entry.file_name())).expect("a copy");
            }
        }
    }
    desk
}

#[test]
fn every_case_gives_its_files_byte_for_byte() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let mut names: Vec<String> = fs::read_dir(root.join("tests/cases"))
        .expect("the folder of cases")
        .map(|entry| entry.expect("an entry").file_name().to_string_lossy().into_owned())
        .collect();
    names.sort();
    assert!(names.len() >= 8, "the cases are there: {names:?}");
    let accept = std::env::var_os("REASSAY_ACCEPT").is_some();
    let desk = desk(root);
    // In the order of their names, which is that of the years where one is carried from another.
    for name in names {
        let run = Command::new(env!("CARGO_BIN_EXE_reassay"))
            .current_dir(&desk)
            .args(["report", "--quiet", &format!("specs/{name}.toml")])
            .output()
            .expect("the program runs");
        // 1: a verdict that fails holds, and the review is made all the same.
        let made = matches!(run.status.code(), Some(0 | 1));
        assert!(made, "{name}: {}", String::from_utf8_lossy(&run.stderr));
        let review = desk.join("reviews").join(&name);
        for file in FILES {
            let given = fs::read_to_string(review.join(file)).expect("a file of the review");
            let golden = root.join("tests/cases").join(&name).join(file);
            if accept {
                fs::write(&golden, &given).expect("the golden file is written");
            } else {
                let wanted = fs::read_to_string(&golden).unwrap_or_default();
                let line = given.lines().zip(wanted.lines()).position(|(a, b)| a != b);
                assert!(given == wanted, "{name}/{file} differs, first in line {:?}", line.map(|at| at + 1));
            }
        }
    }
}
