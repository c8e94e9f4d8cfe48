//! Faulty input and the whole message that it gets. Each folder here holds a `spec.toml` (with the
//! files it names) and `message.txt`, what the program says of it, read by eye when it was made.
//!
//! `REASSAY_ACCEPT=1 cargo test --test all faults` writes the messages anew; look at the difference
//! before it is kept.

mod hostile;
mod large;

use reassay::diagnostics::render::{Look, render};
use reassay::diagnostics::{Fault, Faults};
use reassay::{data, review, source};
use std::collections::BTreeSet;
use std::fs;
use std::path::{Path, PathBuf};

fn root() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/faults")
}

fn cases() -> Vec<PathBuf> {
    let mut folders: Vec<PathBuf> = fs::read_dir(root())
        .unwrap()
        .map(|entry| entry.unwrap().path())
        .filter(|path| path.join("spec.toml").is_file())
        .collect();
    folders.sort();
    folders
}

/// What the program finds wrong with a spec and its files.
fn faults_of(spec: &Path) -> Result<(), Faults> {
    let read = |path: &Path| {
        let name = path.file_name().unwrap_or_default().to_string_lossy().into_owned();
        source::whole(path, &name, "reading the spec")
    };
    let prepared = review::prepare_by(spec, "spec.toml", &read, &|_| ())?;
    data::read(&prepared.plan)?;
    Ok(())
}

#[test]
fn every_faulty_spec_gets_the_message_on_record() {
    let accept = std::env::var_os("REASSAY_ACCEPT").is_some();
    let mut differ = Vec::new();
    for folder in cases() {
        let name = folder.file_name().unwrap().to_string_lossy().into_owned();
        let said = match faults_of(&folder.join("spec.toml")) {
            Ok(()) => panic!("{name}: nothing was found wrong"),
            Err(faults) => render(&faults, Look::default()),
        };
        let record = folder.join("message.txt");
        if accept {
            fs::write(&record, &said).unwrap();
        } else if fs::read_to_string(&record).unwrap_or_default() != said {
            differ.push(format!("== {name}\n{said}"));
        }
    }
    assert!(differ.is_empty(), "messages differ from those on record:\n{}", differ.join("\n"));
}

/// The folders whose faults must each have a case here.
const COVERED: &[&str] = &["src/spec", "src/plan", "src/data"];

#[test]
fn every_kind_of_fault_has_a_case() {
    let mut codes = BTreeSet::new();
    for folder in COVERED {
        for entry in fs::read_dir(Path::new(env!("CARGO_MANIFEST_DIR")).join(folder)).unwrap() {
            let text = fs::read_to_string(entry.unwrap().path()).unwrap_or_default();
            let text = text.split("#[cfg(test)]").next().unwrap_or_default();
            for part in text.split("Fault::wrong(").skip(1) {
                let code = part.trim_start().strip_prefix('"').and_then(|rest| rest.split('"').next());
                codes.extend(code.map(str::to_string));
            }
        }
    }
    let mut shown = BTreeSet::new();
    for folder in cases() {
        if let Err(Faults(faults)) = faults_of(&folder.join("spec.toml")) {
            shown.extend(faults.into_iter().map(|fault| fault.code.to_string()));
        }
    }
    shown.extend(large::CODES.iter().map(|code| code.to_string()));
    let missing: Vec<&String> = codes.difference(&shown).collect();
    assert!(codes.len() > 15, "only {codes:?} were found in the sources");
    assert!(missing.is_empty(), "no case in tests/faults shows {missing:?}");
}

#[test]
fn every_message_names_a_place_and_says_what_would_be_right() {
    for folder in cases() {
        let Err(Faults(faults)) = faults_of(&folder.join("spec.toml")) else { continue };
        for fault in faults {
            let helps = fault.expected.is_some() || fault.repair.is_some() || is_plain(&fault);
            assert!(fault.place.is_some() && helps, "{}: {fault:?}", folder.display());
        }
    }
}

/// The rest of a message where the parser of TOML has nothing to add.
fn is_plain(fault: &Fault) -> bool {
    fault.code == "syntax"
}
