//! What went into a review beside its spec: base, data, overrides, templates; each with its hash, and
//! its name in `inputs/` where inputs are copied.

use crate::diagnostics::{Fault, Faults, Outcome};
use crate::findings::Findings;
use crate::plan::{FileRef, FoundFile, Plan, TemplateChoice};
use crate::source::{self, Hashed, sha256_hex};
use crate::stamp::made::{Content, INPUTS};
use std::path::{Path, PathBuf};

/// One file that went in.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Input {
    /// base, data; stamp, answers or handover of another review; overrides or template.
    pub role: &'static str,
    /// As the spec names it.
    pub written: String,
    /// Where it was read.
    pub path: PathBuf,
    pub sha256: String,
    pub bytes: u64,
    /// Its path in the review's folder; `None` where inputs stay where they are.
    pub kept: Option<String>,
}

impl Input {
    /// The copy in the review's folder.
    pub fn into_file(self) -> Option<(String, Content)> {
        let content = Content::Copy { from: self.path, written: self.written, sha256: self.sha256 };
        self.kept.map(|kept| (kept, content))
    }
}

/// All inputs, in the order base, data, other reviews, overrides, template; a file named twice stands once.
pub fn of(findings: &Findings) -> Outcome<Vec<Input>> {
    let plan = &findings.plan;
    let mut inputs: Vec<Input> = Vec::new();
    let mut faults = Faults::default();
    let mut add = |input: Input| match inputs
        .iter()
        .find(|known| known.written == input.written && known.path == input.path)
    {
        Some(known) if known.sha256 != input.sha256 => faults.push(changed(&input.written)),
        Some(_) => {}
        None => inputs.push(input),
    };
    for base in plan.spec_files.iter().skip(1) {
        let hashed = Hashed { sha256: sha256_hex(&base.bytes), bytes: base.bytes.len() as u64 };
        add(input("base", written_from(plan, &base.path), base.path.clone(), hashed));
    }
    for file in &findings.data.files {
        let hashed = Hashed { sha256: file.sha256.clone(), bytes: file.bytes };
        add(input("data", file.written.clone(), file.path.clone(), hashed));
    }
    for (role, file, found) in linked(plan) {
        let hashed = Hashed { sha256: found.sha256.clone(), bytes: found.bytes.len() as u64 };
        add(input(role, file.written.clone(), file.path.clone(), hashed));
    }
    for (role, file) in others(plan) {
        let hashed = source::stream(&file.path, &file.written, "hashing the input", |_| {})?;
        add(input(role, file.written.clone(), file.path.clone(), hashed));
    }
    if plan.report.inputs_copied {
        name_copies(&mut inputs);
    }
    faults.or(inputs)
}

fn input(role: &'static str, written: String, path: PathBuf, hashed: Hashed) -> Input {
    Input { role, written, path, sha256: hashed.sha256, bytes: hashed.bytes, kept: None }
}

/// What is read of other reviews.
fn linked(plan: &Plan) -> Vec<(&'static str, &FileRef, &FoundFile)> {
    let mut files = Vec::new();
    for linked in &plan.linked {
        let Some(found) = &linked.found else { continue };
        files.push(("stamp", &linked.stamp_json, &found.stamp_json));
        files.push(("answers", &linked.answers, &found.answers));
        files.extend(found.handover.as_ref().map(|handover| ("handover", &linked.handover, handover)));
    }
    files
}

/// Inputs whose bytes the data does not hash.
fn others(plan: &Plan) -> Vec<(&'static str, &FileRef)> {
    let overrides = plan.overrides.as_ref().map(|overrides| ("overrides", &overrides.file));
    let template = match &plan.report.template {
        TemplateChoice::Own(file) => Some(("template", file)),
        TemplateChoice::BuiltIn(_) => None,
    };
    overrides.into_iter().chain(template).collect()
}

/// A path as the spec names it: without the spec's folder.
pub fn written_from(plan: &Plan, path: &Path) -> String {
    let folder = plan.spec_files.first().and_then(|spec| spec.path.parent());
    let inside = folder.and_then(|folder| path.strip_prefix(folder).ok()).unwrap_or(path);
    inside.to_string_lossy().into_owned()
}

/// Names in `inputs/`: the file's own, and where that is taken `name-2.csv` and so on, in the order of
/// the inputs. Letter case does not tell names apart, so that a folder can be carried to any system.
fn name_copies(inputs: &mut [Input]) {
    let mut taken: Vec<String> = Vec::new();
    for input in inputs {
        let own = harmless(&own_name(input));
        let mut name = own.clone();
        let mut number = 2;
        while taken.contains(&name.to_lowercase()) {
            name = match own.rfind('.').filter(|at| *at > 0) {
                Some(at) => format!("{}-{number}{}", &own[..at], &own[at..]),
                None => format!("{own}-{number}"),
            };
            number += 1;
        }
        taken.push(name.to_lowercase());
        input.kept = Some(format!("{INPUTS}{name}"));
    }
}

/// The last part of its path; a file of another review has that review's folder before it.
fn own_name(input: &Input) -> String {
    let mut parts = input.written.rsplit('/');
    let name = parts.next().unwrap_or(&input.written);
    match parts.next() {
        Some(folder) if matches!(input.role, "stamp" | "answers" | "handover") => format!("{folder}-{name}"),
        _ => name.to_string(),
    }
}

/// A file name without characters that a system refuses or a line of SHA256SUMS would have to escape.
fn harmless(name: &str) -> String {
    let safe = |c: char| if c.is_control() || "\\/:*?\"<>|".contains(c) { '_' } else { c };
    let name: String = name.chars().map(safe).collect();
    if name.is_empty() || name.chars().all(|c| c == '.') { format!("input{name}") } else { name }
}

/// A file whose bytes were not the same at two looks.
pub fn changed(written: &str) -> Fault {
    Fault::unreadable("input-changed", format!("{written} changed while it was being read"))
        .expected("inputs that stay as they are while the review is made")
        .repair("run again when nothing writes to the file")
}

#[cfg(test)]
mod tests {
    use super::*;

    fn named(written: &[&str]) -> Vec<String> {
        let hashed = Hashed { sha256: String::new(), bytes: 0 };
        let mut inputs: Vec<Input> = written
            .iter()
            .map(|written| input("data", written.to_string(), PathBuf::from(written), hashed.clone()))
            .collect();
        name_copies(&mut inputs);
        inputs.into_iter().filter_map(|input| input.kept).collect()
    }

    #[test]
    fn copies_of_one_name_are_told_apart() {
        let kept = named(&["2024/a.csv", "2025/a.csv", "A.csv", "a-2.csv", "b", "c/b", ".x", "d/.x"]);
        assert_eq!(
            kept,
            [
                "inputs/a.csv",
                "inputs/a-2.csv",
                "inputs/A-3.csv",
                "inputs/a-2-2.csv",
                "inputs/b",
                "inputs/b-2",
                "inputs/.x",
                "inputs/.x-2"
            ]
        );
    }

    #[test]
    fn names_that_would_need_an_escape_are_made_harmless() {
        assert_eq!(
            named(&["a\\b\n.csv", "..", "x/µ ü.csv"]),
            ["inputs/a_b_.csv", "inputs/input..", "inputs/µ ü.csv"]
        );
    }
}
