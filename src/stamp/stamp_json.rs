//! stamp.json: what went into a review and what came out of it, by hash. Its own SHA-256 is the stamp.
//!
//! It depends on the inputs alone: files are named as the spec names them, and the report, which prints
//! the stamp, is not part of it.

use crate::json::{Json, Object};
use crate::plan::{Link, Plan, TemplateChoice};
use crate::source::sha256_hex;
use crate::stamp::inputs::Input;
use std::fmt;

pub const FORMAT: &str = "reassay-stamp/1";
pub const PROGRAM: &str = "reassay";
pub const VERSION: &str = env!("CARGO_PKG_VERSION");

/// The SHA-256 that identifies a review's inputs and answers.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Stamp(String);

impl Stamp {
    /// The stamp of the bytes of stamp.json.
    pub fn of(stamp_json: &[u8]) -> Stamp {
        Stamp(sha256_hex(stamp_json))
    }

    /// All 64 digits.
    pub fn whole(&self) -> &str {
        &self.0
    }

    /// The first 16 digits in groups of four: a label for the eye, no proof.
    pub fn label(&self) -> String {
        let first: Vec<char> = self.0.chars().take(16).collect();
        let groups: Vec<String> = first.chunks(4).map(|group| group.iter().collect()).collect();
        groups.join(" ")
    }
}

impl fmt::Display for Stamp {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.0)
    }
}

/// A file that the review leaves, by hash.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Left {
    pub file: String,
    pub sha256: String,
}

/// The bytes of stamp.json.
pub fn stamp_json(plan: &Plan, spec: &[u8], inputs: &[Input], left: &[Left]) -> Vec<u8> {
    let review =
        Object::new().text("id", plan.review.id.as_str()).text("status", plan.review.status.word()).done();
    let spec = Object::new().whole("bytes", spec.len() as u64).text("sha256", sha256_hex(spec)).done();
    let template = match &plan.report.template {
        TemplateChoice::BuiltIn(name) => name.as_str(),
        TemplateChoice::Own(file) => file.written.as_str(),
    };
    let left = left.iter().map(|left| {
        Object::new().text("file", left.file.as_str()).text("sha256", left.sha256.as_str()).done()
    });
    Object::new()
        .text("format", FORMAT)
        .put("program", Object::new().text("name", PROGRAM).text("version", VERSION).done())
        .put("review", review)
        .put("previous", link(plan, plan.review.previous.as_ref()))
        .put("supersedes", link(plan, plan.review.supersedes.as_ref()))
        .put("spec", spec)
        .text("template", template)
        .put("inputs", Json::List(inputs.iter().map(input).collect()))
        .put("left", Json::List(left.collect()))
        .done()
        .to_file()
}

/// Another review, with the stamp that it was found to have: the reviews form a chain.
fn link(plan: &Plan, link: Option<&Link>) -> Json {
    let Some(link) = link else { return Json::Null };
    let found = plan.linked(&link.written).and_then(|linked| linked.found.as_ref());
    let stamp = found.map(|found| found.stamp.as_str()).or(link.stamp.as_deref());
    Object::new().text("review", link.written.as_str()).text_if("stamp", stamp).done()
}

fn input(input: &Input) -> Json {
    Object::new()
        .text("role", input.role)
        .text("written", input.written.as_str())
        .text_if("kept", input.kept.as_deref())
        .whole("bytes", input.bytes)
        .text("sha256", input.sha256.as_str())
        .done()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_label_is_the_beginning_of_the_stamp() {
        let stamp = Stamp::of(b"abc");
        assert_eq!(stamp.whole(), "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad");
        assert_eq!(stamp.label(), "ba78 16bf 8f01 cfea");
    }
}
