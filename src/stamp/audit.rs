//! The audit of a review's folder: hash again, look at the inputs, compute again, render again, and say
//! of each whether it is equal, different (what, where, by how much) or not done (why).

use crate::diagnostics::{Fault, Outcome};
use crate::source::{self, sha256_hex};
use crate::stamp::audit_inputs::{self, Ground};
use crate::stamp::differences;
use crate::stamp::listing::{self, What};
use crate::stamp::made::{
    ANSWERS_CSV, ANSWERS_JSON, Content, HANDOVER_JSON, INPUTS, Made, PLAN_TOML, READINGS_CSV, RUN_JSON,
    SPEC_TOML, STAMP_JSON, SUMS,
};
use crate::stamp::places::Places;
use crate::stamp::sums;
use std::fs;
use std::path::{Path, PathBuf};

/// What one part of an audit found.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Found {
    /// With what was looked at.
    Equal(String),
    Different(Vec<Difference>),
    /// And why.
    NotDone(String),
}

/// A file that differs.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Difference {
    /// Its path in the folder, or as seen from the folder.
    pub file: String,
    /// Where and by how much.
    pub what: String,
}

impl Difference {
    pub fn new(file: impl Into<String>, what: impl Into<String>) -> Difference {
        Difference { file: file.into(), what: what.into() }
    }
}

/// An audit's parts, in the order in which they are done.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Audit {
    /// SHA-256 of stamp.json as it lies there, where it can be read.
    pub stamp: Option<String>,
    /// SHA-256 of SHA256SUMS as it lies there.
    pub sums: Option<String>,
    /// `hashes`, `inputs`, `answers`, `report`.
    pub parts: Vec<(&'static str, Found)>,
}

impl Audit {
    pub fn is_different(&self) -> bool {
        self.parts.iter().any(|(_, found)| matches!(found, Found::Different(_)))
    }

    pub fn is_incomplete(&self) -> bool {
        self.parts.iter().any(|(_, found)| matches!(found, Found::NotDone(_)))
    }
}

/// What is to be made again: the spec's path (whose name gives the review's default id) and the real
/// places of all files.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Again {
    pub spec: PathBuf,
    pub places: Places,
}

/// Audits a folder. `spec` is the spec's place where the user names one; `make` makes a review again.
///
/// # Errors
/// `not-a-review` where the folder has neither stamp.json nor SHA256SUMS, or cannot be listed; all
/// other trouble is part of what was found.
pub fn audit(
    folder: &Path,
    spec: Option<&Path>,
    make: &dyn Fn(&Again) -> Outcome<Made>,
) -> Result<Audit, Fault> {
    let shown = folder.display();
    let files = listing::files(folder).map_err(|error| {
        Fault::unreadable("unreadable-folder", format!("auditing {shown}: {}", error.kind()))
            .repair("name the folder of a review")
    })?;
    if !files.iter().any(|(path, _)| path == STAMP_JSON || path == SUMS) {
        return Err(Fault::wrong("not-a-review", format!("{shown} is not the folder of a review"))
            .expected("a folder with stamp.json and SHA256SUMS")
            .repair("name the review's own folder, not the one that holds it"));
    }
    let hash_of = |name: &str| fs::read(folder.join(name)).ok().map(|bytes| sha256_hex(&bytes));
    let hashes = hashes(folder, &files);
    let (inputs, again) = match Ground::of(folder, spec) {
        Ok(ground) => audit_inputs::inputs(&ground),
        Err(why) => (Found::NotDone(why.clone()), Err(why)),
    };
    let made = again.and_then(|again| make(&again).map_err(|faults| first_of(&faults)));
    let (answers, report) = match made {
        Ok(made) => compared(folder, &files, &made),
        Err(why) => (Found::NotDone(why.clone()), Found::NotDone(why)),
    };
    Ok(Audit {
        stamp: hash_of(STAMP_JSON),
        sums: hash_of(SUMS),
        parts: vec![("hashes", hashes), ("inputs", inputs), ("answers", answers), ("report", report)],
    })
}

fn first_of(faults: &crate::diagnostics::Faults) -> String {
    let more = match faults.0.len() {
        0 | 1 => String::new(),
        n => format!(" (and {} more)", n - 1),
    };
    let first = faults.0.first();
    let place = first.and_then(|fault| fault.place.as_ref());
    let place = place.map_or(String::new(), |place| format!("{}:{}: ", place.file, place.line));
    let message = first.map_or("no reason was given", |fault| &fault.message);
    format!("it cannot be made again: {place}{message}{more}")
}

/// Every file against SHA256SUMS, and every line of SHA256SUMS against the files.
fn hashes(folder: &Path, files: &[(String, What)]) -> Found {
    let sums = match fs::read(folder.join(SUMS)) {
        Ok(bytes) => bytes,
        Err(error) if error.kind() == std::io::ErrorKind::NotFound => {
            return Found::Different(vec![Difference::new(SUMS, "missing")]);
        }
        Err(error) => return Found::NotDone(format!("{SUMS} cannot be read: {}", error.kind())),
    };
    let sums = match sums::read(&sums) {
        Ok(sums) => sums,
        Err(what) => return Found::Different(vec![Difference::new(SUMS, what)]),
    };
    let mut differences = Vec::new();
    let mut unread = Vec::new();
    for (path, sha256) in &sums {
        match files.iter().find(|(own, _)| own == path) {
            None => differences.push(Difference::new(path, "missing")),
            Some((_, What::Other)) => differences.push(Difference::new(path, "a link or the like, no file")),
            Some((_, What::File)) => match source::stream(&folder.join(path), path, "hashing", |_| {}) {
                Ok(hashed) if hashed.sha256 == *sha256 => {}
                Ok(hashed) => differences.push(Difference::new(
                    path,
                    format!("its SHA-256 is {}, {SUMS} says {sha256}", hashed.sha256),
                )),
                Err(fault) => unread.push(fault.message),
            },
        }
    }
    let known = |path: &str| path == SUMS || path == RUN_JSON || sums.iter().any(|(own, _)| own == path);
    for (path, _) in files.iter().filter(|(path, _)| !known(path)) {
        differences.push(Difference::new(path, format!("not in {SUMS}")));
    }
    if !differences.is_empty() {
        Found::Different(differences)
    } else if let Some(why) = unread.into_iter().next() {
        Found::NotDone(why)
    } else {
        Found::Equal(format!("{} files, as {SUMS} says", sums.len()))
    }
}

/// The files that hold answers; all others but the inputs are the report's.
const ANSWERS: [&str; 6] = [ANSWERS_JSON, ANSWERS_CSV, READINGS_CSV, HANDOVER_JSON, SPEC_TOML, PLAN_TOML];

fn compared(folder: &Path, files: &[(String, What)], made: &Made) -> (Found, Found) {
    let mut again: Vec<(&str, Vec<u8>)> = Vec::new();
    for (path, content) in &made.files {
        if let Content::Bytes(bytes) = content {
            again.push((path, bytes.clone()));
        }
    }
    let sums = made.sums().into_bytes();
    again.push((SUMS, sums));
    let is_answer = |path: &str| ANSWERS.contains(&path);
    let part = |answers: bool| {
        let mut differences = Vec::new();
        let mut equal = Vec::new();
        for (path, bytes) in again.iter().filter(|(path, _)| is_answer(path) == answers) {
            match fs::read(folder.join(path)) {
                Ok(here) => match differences::between(path, &here, bytes) {
                    None => equal.push(*path),
                    Some(what) => differences.push(Difference::new(*path, what)),
                },
                Err(error) => {
                    differences.push(Difference::new(*path, format!("cannot be read: {}", error.kind())))
                }
            }
        }
        for (path, _) in files {
            let made_again = again.iter().any(|(own, _)| own == path);
            if is_answer(path) == answers && !made_again && !path.starts_with(INPUTS) && path != RUN_JSON {
                differences.push(Difference::new(path, "not there when made again"));
            }
        }
        if differences.is_empty() {
            let done = if answers { "computed" } else { "rendered" };
            Found::Equal(format!("{done} again, byte for byte: {}", in_short(&equal)))
        } else {
            Found::Different(differences)
        }
    };
    (part(true), part(false))
}

/// The names, figures counted.
fn in_short(paths: &[&str]) -> String {
    let figures = paths.iter().filter(|path| path.starts_with("figures/")).count();
    let mut names: Vec<String> =
        paths.iter().filter(|path| !path.starts_with("figures/")).map(|path| path.to_string()).collect();
    if figures > 0 {
        names.push(format!("{figures} {}", if figures == 1 { "figure" } else { "figures" }));
    }
    names.join(", ")
}
