//! A review's files in memory: what will be written, or what an audit compares with.

use crate::diagnostics::{Fault, Outcome};
use crate::findings::Findings;
use crate::plan::Status;
use crate::report::Rendered;
use crate::source::sha256_hex;
use crate::stamp::answers_csv::answers_csv;
use crate::stamp::answers_json::answers_json;
use crate::stamp::handover::handover;
use crate::stamp::inputs::{self, Input};
use crate::stamp::stamp_json::{Left, Stamp, stamp_json};
use crate::stamp::sums;
use std::collections::BTreeMap;
use std::path::PathBuf;

pub const ANSWERS_JSON: &str = "answers.json";
pub const ANSWERS_CSV: &str = "answers.csv";
pub const READINGS_CSV: &str = "readings.csv";
pub const HANDOVER_JSON: &str = "handover.json";
pub const PLAN_TOML: &str = "plan.toml";
pub const SPEC_TOML: &str = "spec.toml";
pub const STAMP_JSON: &str = "stamp.json";
pub const SUMS: &str = "SHA256SUMS";
pub const RUN_JSON: &str = "run.json";
/// The folder of copied inputs, with its `/`.
pub const INPUTS: &str = "inputs/";

/// What one file of a review holds.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Content {
    Bytes(Vec<u8>),
    /// A copy of an input, whose bytes had this hash when they were read.
    Copy {
        from: PathBuf,
        written: String,
        sha256: String,
    },
}

impl Content {
    /// SHA-256 of the file, lower-case hex.
    pub fn sha256(&self) -> String {
        match self {
            Content::Bytes(bytes) => sha256_hex(bytes),
            Content::Copy { sha256, .. } => sha256.clone(),
        }
    }
}

/// A whole review, SHA256SUMS and run.json aside.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Made {
    /// The name of its folder.
    pub id: String,
    pub status: Status,
    pub stamp: Stamp,
    /// By path inside the folder, with `/`.
    pub files: BTreeMap<String, Content>,
}

/// Makes the report, which prints the stamp and the inputs' hashes.
pub type Render<'a> = dyn Fn(&Findings, &Stamp, &[Input]) -> Outcome<Rendered> + 'a;

/// Texts that earlier stages write.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct Texts {
    pub plan_toml: String,
    pub readings_csv: String,
}

impl Made {
    /// Puts a review together: answers, handover and inputs give the stamp, the report prints it, and
    /// the sums hold it all.
    pub fn of(findings: &Findings, texts: Texts, render: &Render<'_>) -> Outcome<Made> {
        let plan = &findings.plan;
        let inputs = inputs::of(findings)?;
        let mut files = BTreeMap::new();
        files.insert(ANSWERS_JSON.to_string(), answers_json(findings).to_file());
        files.insert(ANSWERS_CSV.to_string(), answers_csv(findings));
        files.insert(READINGS_CSV.to_string(), texts.readings_csv.into_bytes());
        if plan.review.status == Status::Final {
            files.insert(HANDOVER_JSON.to_string(), handover(findings).to_json().to_file());
        }
        let Some(spec) = plan.spec_files.first() else {
            return Err(Fault::wrong("no-spec", "the plan has no spec").into());
        };
        let left = [ANSWERS_JSON, READINGS_CSV, HANDOVER_JSON];
        let left = left.iter().filter_map(|name| {
            files.get(*name).map(|bytes| Left { file: name.to_string(), sha256: sha256_hex(bytes) })
        });
        let stamped = stamp_json(plan, &spec.bytes, &inputs, &left.collect::<Vec<_>>());
        let stamp = Stamp::of(&stamped);
        files.insert(STAMP_JSON.to_string(), stamped);
        files.insert(SPEC_TOML.to_string(), spec.bytes.clone());
        files.insert(PLAN_TOML.to_string(), texts.plan_toml.into_bytes());

        let rendered = render(findings, &stamp, &inputs)?;
        if plan.report.markdown {
            files.insert("report.md".to_string(), rendered.markdown.into_bytes());
        }
        if plan.report.html {
            files.insert("report.html".to_string(), rendered.html.into_bytes());
        }
        for (name, svg) in rendered.figures {
            let ending = if name.ends_with(".svg") { "" } else { ".svg" };
            files.insert(format!("figures/{name}{ending}"), svg.into_bytes());
        }
        let mut files: BTreeMap<String, Content> =
            files.into_iter().map(|(name, bytes)| (name, Content::Bytes(bytes))).collect();
        files.extend(inputs.into_iter().filter_map(Input::into_file));
        Ok(Made { id: plan.review.id.clone(), status: plan.review.status, stamp, files })
    }

    /// SHA256SUMS: all files of the review, sorted by path.
    pub fn sums(&self) -> String {
        sums::write(self.files.iter().map(|(path, content)| (path.as_str(), content.sha256())))
    }
}
