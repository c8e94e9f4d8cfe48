//! Golden cases: a spec of `specs/` and the files that its review must hold, byte for byte. They pin wording and
//! bytes, not truth: the figures are held against published and high-precision values elsewhere.
//! `REASSAY_ACCEPT=1 cargo test cases` writes them again, to be read by eye.

use std::fs;
use std::path::{Path, PathBuf};
use std::process::Command;

const FILES: [&str; 3] = ["answers.json", "plan.toml", "report.md"];

fn scratch(name: &str) -> PathBuf {
    Path::new(env!("CARGO_TARGET_TMPDIR")).join("cases").join(name)
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
    for name in names {
        let out = scratch(&name);
        let _ = fs::remove_dir_all(&out);
        let spec = root.join("specs").join(format!("{name}.toml"));
        let run = Command::new(env!("CARGO_BIN_EXE_reassay"))
            .current_dir(root)
            .args(["report", "--quiet", "--out"])
            .arg(&out)
            .arg(&spec)
            .output()
            .expect("the program runs");
        assert!(run.status.success(), "{name}: {}", String::from_utf8_lossy(&run.stderr));
        let review =
            fs::read_dir(&out).expect("a review").next().expect("its folder").expect("readable").path();
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
