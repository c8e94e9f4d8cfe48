//! The reviews that a spec names: the previous one, the one that it amends, and those that a prior is
//! carried from. Their folders are found here; the data stage reads them.

use crate::plan::make::Ground;
use crate::plan::{FileRef, Link, Plan};
use crate::spec::table::{Kind, Table};

/// Another review, and the files of it that this one reads.
#[derive(Debug, Clone, PartialEq)]
pub struct LinkedReview {
    pub link: Link,
    pub stamp_json: FileRef,
    pub answers: FileRef,
    /// Only final reviews leave one.
    pub handover: FileRef,
    /// `None` until the data stage has read it.
    pub found: Option<FoundReview>,
}

/// What was found in the folder of another review, its hashes checked against its stamp.
#[derive(Debug, Clone, PartialEq)]
pub struct FoundReview {
    pub id: String,
    pub is_final: bool,
    /// SHA-256 of its stamp.json.
    pub stamp: String,
    pub stamp_json: FoundFile,
    pub answers: FoundFile,
    pub handover: Option<FoundFile>,
    /// The id of a review beside it that amends it.
    pub superseded_by: Option<String>,
}

#[derive(Debug, Clone, PartialEq)]
pub struct FoundFile {
    pub bytes: Vec<u8>,
    pub sha256: String,
}

impl LinkedReview {
    fn new(link: Link) -> LinkedReview {
        let file = |name: &str| FileRef {
            written: format!("{}/{name}", link.written),
            path: link.folder.join(name),
            sha256: None,
            span: link.span.clone(),
        };
        LinkedReview {
            stamp_json: file("stamp.json"),
            answers: file("answers.json"),
            handover: file("handover.json"),
            found: None,
            link,
        }
    }
}

impl Plan {
    /// A review that the spec names by this folder, as written.
    pub fn linked(&self, written: &str) -> Option<&LinkedReview> {
        let written = written.trim_end_matches('/');
        self.linked.iter().find(|linked| linked.link.written == written)
    }
}

/// All of them, each folder once.
pub fn all<'a>(
    links: impl Iterator<Item = &'a Link>,
    priors: impl Iterator<Item = &'a Table>,
    ground: &mut Ground,
) -> Vec<LinkedReview> {
    let mut all: Vec<LinkedReview> = Vec::new();
    let mut add = |link: Link| {
        if !all.iter().any(|known| known.link.written == link.written) {
            all.push(LinkedReview::new(link));
        }
    };
    links.cloned().for_each(&mut add);
    for prior in priors {
        carried_from(prior, ground).into_iter().for_each(&mut add);
    }
    all
}

/// The reviews that a prior's table names. Its keys belong to the prior's own stage; here only the
/// path is found, since paths are relative to the file in which they stand.
fn carried_from(prior: &Table, ground: &mut Ground) -> Vec<Link> {
    let mut found: Vec<Link> =
        prior.tables("parts").into_iter().flat_map(|part| carried_from(part, ground)).collect();
    let text = |key: &str| match prior.get(key).map(|value| (&value.kind, &value.span)) {
        Some((Kind::Text(text), span)) => Some((text.clone(), span.clone())),
        _ => None,
    };
    if let (Some((from, _)), Some((written, span))) = (text("from"), text("review"))
        && from == "carried"
        && let Some(file) = ground.file(written.trim_end_matches('/'), None, &span)
    {
        let stamp = text("stamp").map(|(stamp, _)| stamp.to_ascii_lowercase());
        found.push(Link { folder: file.path, written: file.written, stamp, reason: None, span });
    }
    found
}
