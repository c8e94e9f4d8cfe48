//! The program as a user runs it: statuses, streams, folders, and an audit that finds every change.

use std::fs;
use std::path::{Path, PathBuf};
use std::process::{Command, Output, Stdio};

/// A copy of the examples in a folder of its own, gone when the test is.
struct Desk(PathBuf);

impl Desk {
    fn new(name: &str) -> Desk {
        let desk = std::env::temp_dir().join(format!("reassay-desk-{}-{name}", std::process::id()));
        let root = Path::new(env!("CARGO_MANIFEST_DIR"));
        for folder in ["specs", "specs/shared", "demo-data"] {
            fs::create_dir_all(desk.join(folder)).unwrap();
            for entry in fs::read_dir(root.join(folder)).unwrap().flatten() {
                if entry.path().is_file() {
                    fs::copy(entry.path(), desk.join(folder).join(entry.file_name())).unwrap();
                }
            }
        }
        Desk(desk)
    }

    fn command(&self, arguments: &[&str]) -> Command {
        let mut command = Command::new(env!("CARGO_BIN_EXE_reassay"));
        command.args(arguments).current_dir(&self.0);
        command
    }

    fn run(&self, arguments: &[&str]) -> (i32, String, String) {
        let Output { status, stdout, stderr } = self.command(arguments).output().unwrap();
        let text = |bytes: Vec<u8>| String::from_utf8(bytes).unwrap();
        (status.code().unwrap(), text(stdout), text(stderr))
    }

    fn files(&self, folder: &str) -> Vec<(String, Vec<u8>)> {
        let root = self.0.join(folder);
        let mut found = Vec::new();
        let mut folders = vec![root.clone()];
        while let Some(folder) = folders.pop() {
            for entry in fs::read_dir(folder).unwrap().flatten() {
                if entry.path().is_dir() {
                    folders.push(entry.path());
                } else {
                    let name = entry.path().strip_prefix(&root).unwrap().to_string_lossy().into_owned();
                    found.push((name, fs::read(entry.path()).unwrap()));
                }
            }
        }
        found.sort();
        found
    }
}

impl Drop for Desk {
    fn drop(&mut self) {
        let _ = fs::remove_dir_all(&self.0);
    }
}

const SPEC: &str = "specs/01-level-interval.toml";
const REVIEW: &str = "reviews/01-level-interval";

/// Small, with a data file of its own; invented.
const WELLS: &str = r#"
[review]
title = "Two wells"
period = 2025
date = 2026-01-20
status = "final"
[quantity]
name = "chloride"
unit = "mg/L"
[[readings]]
file = "../demo-data/wells.csv"
value = "x"
period = "year"
series = "well"
[within]
from = "stated"
sd = 2.0
basis = "duplicates"
[prior]
from = "stated"
mean = 40
sd = 3
basis = "sister works"
[[question]]
id = "level"
ask = "level interval"
"#;
const WELLS_REVIEW: &str = "reviews/wells";

#[test]
fn a_report_ends_with_what_belongs_on_the_signed_page() {
    let desk = Desk::new("ends");
    let (status, out, errors) = desk.run(&["report", SPEC]);
    assert_eq!((status, errors.as_str()), (0, ""));
    let sum = |file: &str| {
        let output = Command::new("sha256sum").arg(file).current_dir(desk.0.join(REVIEW)).output().unwrap();
        String::from_utf8(output.stdout).unwrap()[..64].to_string()
    };
    assert!(out.contains(&format!("\nstamp       {}\n", sum("stamp.json"))), "{out}");
    assert!(out.contains(&format!("\nSHA256SUMS  {}\n", sum("SHA256SUMS"))), "{out}");
    let report = fs::read_to_string(desk.0.join(REVIEW).join("report.md")).unwrap();
    assert!(report.contains(&sum("stamp.json")), "the report prints the whole stamp");
    let check = Command::new("sha256sum")
        .args(["-c", "--strict", "--quiet", "SHA256SUMS"])
        .current_dir(desk.0.join(REVIEW))
        .status();
    assert!(check.unwrap().success());
}

#[test]
fn place_zone_language_and_threads_do_not_change_a_byte() {
    let (one, two) = (Desk::new("one"), Desk::new("two"));
    let first = one
        .command(&["report", "specs/weights.toml", "--jobs", "1", "--quiet"])
        .env("TZ", "UTC")
        .status()
        .unwrap();
    let mut second = two.command(&["report", "../specs/weights.toml", "--jobs", "4"]);
    second.args(["--out", "deep/er"]).current_dir(two.0.join("demo-data"));
    second.env("TZ", "Pacific/Apia").env("LANG", "tr_TR.UTF-8").env("LC_ALL", "tr_TR.UTF-8");
    assert_eq!(first.code(), second.stdout(Stdio::null()).status().unwrap().code());
    let name = "LW-E2-2025";
    let but_run = |files: Vec<(String, Vec<u8>)>| files.into_iter().filter(|(name, _)| name != "run.json");
    let here: Vec<_> = but_run(one.files(&format!("reviews/{name}"))).collect();
    let there: Vec<_> = but_run(two.files(&format!("demo-data/deep/er/{name}"))).collect();
    assert!(here.len() > 8);
    for (a, b) in here.iter().zip(&there) {
        assert!(a == b, "{} differs from {}", a.0, b.0);
    }
    assert_eq!(here.len(), there.len());
}

#[test]
fn an_audit_finds_one_flipped_byte_in_any_file() {
    let desk = Desk::new("flip");
    fs::write(desk.0.join("demo-data/wells.csv"), "well,year,x\nA,2025,41.5\nA,2025,42.75\nB,2025,39\n")
        .unwrap();
    fs::write(desk.0.join("specs/wells.toml"), WELLS).unwrap();
    assert_eq!(desk.run(&["report", "specs/wells.toml", "--quiet"]), (0, String::new(), String::new()));
    let (status, out, errors) = desk.run(&["audit", WELLS_REVIEW]);
    assert_eq!((status, errors.as_str()), (0, ""), "{out}");
    for part in ["hashes", "inputs", "answers", "report"] {
        let line = out.lines().find(|line| line.trim_start().starts_with(part)).unwrap();
        assert!(line.contains(" equal "), "{line}");
    }
    let mut places: Vec<(PathBuf, String)> = desk
        .files(WELLS_REVIEW)
        .into_iter()
        .filter(|(name, _)| name != "run.json")
        .map(|(name, _)| (desk.0.join(WELLS_REVIEW).join(&name), name))
        .collect();
    for outside in ["specs/wells.toml", "demo-data/wells.csv"] {
        places.push((desk.0.join(outside), format!("../../{outside}")));
    }
    for (path, name) in places {
        let whole = fs::read(&path).unwrap();
        let mut flipped = whole.clone();
        flipped[whole.len() / 2] ^= 1;
        fs::write(&path, &flipped).unwrap();
        let (status, out, _) = desk.run(&["audit", WELLS_REVIEW]);
        assert_eq!(status, 1, "{name}\n{out}");
        assert!(out.contains(&format!("    {name}: ")), "{name}\n{out}");
        fs::write(&path, &whole).unwrap();
    }
}

#[test]
fn wrong_calls_wrong_specs_and_missing_files_have_their_statuses() {
    let desk = Desk::new("wrong");
    assert_eq!(desk.run(&["report"]).0, 2);
    assert_eq!(desk.run(&["report", SPEC, "--jobs", "0"]).0, 2);
    assert_eq!(desk.run(&["report", "specs/none.toml"]).0, 3);
    assert_eq!(desk.run(&["audit", "specs"]).0, 2);
    assert_eq!(desk.run(&["audit", "none"]).0, 3);
    let (status, out, errors) = desk.run(&["report", SPEC, SPEC]);
    assert_eq!((status, out.as_str()), (2, ""));
    assert!(errors.starts_with("same-id: "), "{errors}");
    fs::write(desk.0.join("specs/wrong.toml"), "[reviev]\n").unwrap();
    let (status, out, errors) = desk.run(&["report", SPEC, "specs/wrong.toml"]);
    assert_eq!((status, out.as_str()), (2, ""));
    assert!(errors.contains("specs/wrong.toml:1:"), "{errors}");
    assert!(!desk.0.join("reviews").exists(), "one wrong spec of a run: nothing is written");
    assert_eq!(desk.run(&["--help"]).0, 0);
}

#[test]
fn check_computes_and_writes_nothing() {
    let desk = Desk::new("check");
    let (status, out, errors) = desk.run(&["check", SPEC]);
    assert_eq!((status, errors.as_str()), (0, ""));
    for word in ["review", "period", "quantity", "rows", "series", "question"] {
        assert!(out.lines().any(|line| line.trim_start().starts_with(word)), "{word}\n{out}");
    }
    assert!(!desk.0.join("reviews").exists());
}

#[test]
fn a_closed_pipe_is_a_quiet_success_and_a_full_disk_is_not() {
    let desk = Desk::new("pipe");
    let mut child =
        desk.command(&["report", SPEC]).stdout(Stdio::piped()).stderr(Stdio::piped()).spawn().unwrap();
    drop(child.stdout.take());
    let ended = child.wait_with_output().unwrap();
    assert_eq!((ended.status.code(), ended.stderr.as_slice()), (Some(0), &b""[..]));
    if let Ok(full) = fs::OpenOptions::new().write(true).open("/dev/full") {
        let ended = desk.command(&["check", SPEC]).stdout(full).output().unwrap();
        assert_eq!(ended.status.code(), Some(3));
        assert!(String::from_utf8_lossy(&ended.stderr).contains("standard output"));
    }
}

#[test]
fn a_verdict_marked_fail_ends_with_status_1() {
    let desk = Desk::new("fail");
    let spec = fs::read_to_string(desk.0.join(SPEC)).unwrap();
    let first = spec.find("[[question]]").unwrap();
    let rule = "[[question]]\nid = \"sure\"\nask = \"level chance\"\nabove = -1e6\n\
                [question.rule]\nagreed = 2020-01-01\n\
                verdicts = [ { say = \"above\", chance_at_least = 0.5, fail = true }, { say = \"not decided\" } ]\n\n";
    fs::write(desk.0.join(SPEC), format!("{}{rule}{}", &spec[..first], &spec[first..])).unwrap();
    let (status, out, errors) = desk.run(&["report", SPEC]);
    assert_eq!((status, errors.as_str()), (1, ""), "{out}");
    assert!(out.contains("above (fail)"), "{out}");
}
