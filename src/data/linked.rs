//! Reading the reviews that a spec names: their stamp, answers and handover, each checked by its hash.

use crate::diagnostics::{Fault, Faults, Outcome};
use crate::json::{At, Json};
use crate::plan::{FileRef, FoundFile, FoundReview, LinkedReview, Plan};
use crate::source::{listed, sha256_hex, whole};
use std::path::Path;

/// Reads every review that the spec names into the plan.
pub fn read_linked(plan: &mut Plan) -> Outcome<()> {
    let mut faults = Faults::default();
    for linked in &mut plan.linked {
        match read(linked) {
            Ok(found) => linked.found = Some(found),
            Err(fault) => {
                let place = linked.link.span.place();
                faults.push(if fault.place.is_none() { fault.at(place) } else { fault });
            }
        }
    }
    faults.or(())
}

fn read(linked: &LinkedReview) -> Result<FoundReview, Fault> {
    let stamp_json = file(&linked.stamp_json)
        .map_err(|fault| fault.repair("name the folder of a review, as seen from the spec"))?;
    let stamp = stamp_json.sha256.clone();
    if let Some(wanted) = &linked.link.stamp
        && *wanted != stamp
    {
        return Err(Fault::wrong(
            "other-stamp",
            format!("the review {} has another stamp", linked.link.written),
        )
        .expected(format!("the stamp {wanted}, found {stamp}"))
        .repair("name the review that was meant, or audit that folder: it may have been changed"));
    }
    let json = Json::read(&stamp_json.bytes).map_err(|why| unread(&linked.stamp_json, &why))?;
    let stamped = Stamped::of(&At::root(&json)).map_err(|why| unread(&linked.stamp_json, &why))?;
    let answers = checked(&linked.answers, stamped.left("answers.json"))?
        .ok_or_else(|| unread(&linked.stamp_json, "it names no answers.json"))?;
    let handover = checked(&linked.handover, stamped.left("handover.json"))?;
    Ok(FoundReview {
        is_final: stamped.status == "final",
        id: stamped.id,
        superseded_by: superseded_by(&linked.stamp_json.path, &stamp),
        stamp,
        stamp_json,
        answers,
        handover,
    })
}

/// What its stamp.json says of a review.
struct Stamped {
    id: String,
    status: String,
    /// File and SHA-256.
    left: Vec<(String, String)>,
}

impl Stamped {
    fn of(at: &At<'_>) -> Result<Stamped, String> {
        let review = at.key("review")?;
        let one = |at: &At<'_>| Ok((at.text("file")?.to_string(), at.text("sha256")?.to_string()));
        Ok(Stamped {
            id: review.text("id")?.to_string(),
            status: review.text("status")?.to_string(),
            left: at.each("left", one)?,
        })
    }

    fn left(&self, file: &str) -> Option<&str> {
        self.left.iter().find(|(own, _)| own == file).map(|(_, sha256)| sha256.as_str())
    }
}

fn file(file: &FileRef) -> Result<FoundFile, Fault> {
    let bytes = whole(&file.path, &file.written, "reading another review")?;
    Ok(FoundFile { sha256: sha256_hex(&bytes), bytes })
}

/// A file that the stamp names by its hash; `None` where it names none.
fn checked(of: &FileRef, sha256: Option<&str>) -> Result<Option<FoundFile>, Fault> {
    let Some(sha256) = sha256 else { return Ok(None) };
    let found = file(of)?;
    if found.sha256 != sha256 {
        return Err(Fault::wrong("changed-review", format!("{} is not as its review left it", of.written))
            .expected(format!("bytes with the SHA-256 {sha256}, found {}", found.sha256))
            .repair("take that review's folder from where it is kept, and audit it"));
    }
    Ok(Some(found))
}

fn unread(file: &FileRef, why: &str) -> Fault {
    Fault::wrong("bad-review", format!("{} cannot be read as a review's: {why}", file.written))
        .expected("the files of a review, unchanged")
        .repair("take that review's folder from where it is kept, and audit it")
}

/// The id of a review in a neighbouring folder that says it amends the one with this stamp. An audit
/// reads the copies, which have no neighbours: it finds none, and need not.
fn superseded_by(stamp_json: &Path, stamp: &str) -> Option<String> {
    let beside = stamp_json.parent()?.parent()?;
    listed(beside).iter().find_map(|folder| {
        let bytes = whole(&folder.join("stamp.json"), "stamp.json", "reading another review").ok()?;
        let json = Json::read(&bytes).ok()?;
        let amended = json.get("supersedes")?.get("stamp")?.as_text()?;
        (amended == stamp).then(|| json.get("review")?.get("id")?.as_text().map(str::to_string))?
    })
}
