//! Writing a review's folder: beside its place, then moved into it. Whatever goes wrong, what was there
//! before is there still, and nothing half-written is left.
//!
//! A run that is killed may leave a hidden folder `.ID.part-…` beside the reviews; the next run of the
//! same review takes it away.

use crate::diagnostics::{Fault, Outcome};
use crate::json::Json;
use crate::source;
use crate::stamp::inputs::changed;
use crate::stamp::listing::{self, What};
use crate::stamp::made::{Content, Made, RUN_JSON, STAMP_JSON, SUMS};
use crate::stamp::sums;
use std::fs::{self, File};
use std::io::{self, Write};
use std::path::{Path, PathBuf};

/// Held while a folder is being written, so that a left-over is told from a run at work.
const LOCK: &str = ".lock";

/// What became of a review's folder.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Written {
    pub folder: PathBuf,
    /// True where a final review of the same bytes was there already and was left alone.
    pub already_there: bool,
    /// A draft that was replaced but could not be removed.
    pub left_over: Option<PathBuf>,
}

/// A review written beside its place, or found in it already.
#[derive(Debug)]
pub struct Ready {
    folder: PathBuf,
    /// `None` where the very same review is there already.
    staging: Option<Staging>,
    replaces: bool,
}

/// Writes a review beside its place in `out`, which is made where it does not exist. `run_json` gives
/// the bytes of run.json for the folder's final place. Dropped before [`Ready::place`], it leaves nothing.
///
/// # Errors
/// `final-review`: a final review of other bytes is there. `folder-not-a-review`, `folder-holds-more`:
/// what is there would be lost. `input-changed`: an input is no longer what was read.
/// `unwritable-folder`: the system refused.
pub fn ready(made: &Made, out: &Path, run_json: &dyn Fn(&Path) -> Vec<u8>) -> Outcome<Ready> {
    let new_out = !out.exists();
    fs::create_dir_all(out).map_err(|error| unwritable(out, &error))?;
    let folder = out.join(&made.id);
    let replaces = match occupant(made, &folder)? {
        Occupant::Same => return Ok(Ready { folder, staging: None, replaces: false }),
        Occupant::None => false,
        Occupant::Replaceable => true,
    };
    clear_left_overs(out, &made.id);
    let mut staging = Staging::new(out, &made.id)?;
    staging.new_out = new_out.then(|| out.to_path_buf());
    for (path, content) in &made.files {
        put(&staging.path, path, content)?;
    }
    put(&staging.path, SUMS, &Content::Bytes(made.sums().into_bytes()))?;
    put(&staging.path, RUN_JSON, &Content::Bytes(run_json(&folder)))?;
    Ok(Ready { folder, staging: Some(staging), replaces })
}

impl Ready {
    /// Moves the review into its place.
    pub fn place(self) -> Outcome<Written> {
        let left_over = match self.staging {
            None => return Ok(Written { folder: self.folder, already_there: true, left_over: None }),
            Some(staging) => staging.move_to(&self.folder, self.replaces)?,
        };
        Ok(Written { folder: self.folder, already_there: false, left_over })
    }
}

/// What stands at the folder's place.
enum Occupant {
    None,
    /// A final review of the very same bytes.
    Same,
    /// A draft or an interim review, or an empty folder.
    Replaceable,
}

fn occupant(made: &Made, folder: &Path) -> Outcome<Occupant> {
    let shown = folder.display();
    let about = match fs::symlink_metadata(folder) {
        Err(error) if error.kind() == io::ErrorKind::NotFound => return Ok(Occupant::None),
        Err(error) => return Err(unwritable(folder, &error).into()),
        Ok(about) => about,
    };
    if !about.is_dir() {
        let what = if about.is_symlink() { "a link" } else { "a file" };
        return Err(Fault::wrong(
            "folder-not-a-review",
            format!("{shown} is {what}, not the folder of a review"),
        )
        .expected("no such path, or the folder of a draft of this review")
        .repair("move it away, or choose another --out")
        .into());
    }
    let files = listing::files(folder).map_err(|error| unwritable(folder, &error))?;
    if files.is_empty() {
        return Ok(Occupant::Replaceable);
    }
    let Some(stamp) = fs::read(folder.join(STAMP_JSON)).ok().filter(|_| holds(&files, SUMS)) else {
        return Err(Fault::wrong("folder-not-a-review", format!("{shown} is not the folder of a review"))
            .expected("an empty place, or a folder with stamp.json and SHA256SUMS")
            .repair("move it away, or choose another --out")
            .into());
    };
    let difference = difference_from(made, folder, &files);
    if is_final(&stamp) {
        return match difference {
            None => Ok(Occupant::Same),
            Some(path) => Err(final_review(made, &shown.to_string(), &path).into()),
        };
    }
    match foreign_file(folder, &files) {
        None => Ok(Occupant::Replaceable),
        Some(path) => Err(Fault::wrong(
            "folder-holds-more",
            format!("{shown} holds {path}, which is no file of the review and would be lost"),
        )
        .expected("a draft's folder with its own files only")
        .repair(format!("move {path} to another place"))
        .into()),
    }
}

fn final_review(made: &Made, shown: &str, path: &str) -> Fault {
    Fault::wrong("final-review", format!("{shown} holds a final review; this one differs from it in {path}"))
        .expected("a final review stays as it was released")
        .repair(format!(
            "give the amendment an id of its own and say what it replaces: supersedes = {{ review = \"{shown}\", stamp = \"…\", reason = \"…\" }} (this one's stamp: {})",
            made.stamp.label()
        ))
}

fn holds(files: &[(String, What)], path: &str) -> bool {
    files.iter().any(|(own, what)| own == path && *what == What::File)
}

/// Unless the stamp says draft or interim, a review counts as final: it is not ours to overwrite.
fn is_final(stamp_json: &[u8]) -> bool {
    let stamp = Json::read(stamp_json).unwrap_or(Json::Null);
    let status = stamp.get("review").and_then(|review| review.get("status")).and_then(Json::as_text);
    !matches!(status, Some("draft" | "interim"))
}

/// The first path in which the folder and the review differ, run.json aside.
fn difference_from(made: &Made, folder: &Path, files: &[(String, What)]) -> Option<String> {
    let same = |path: &str, sha256: &str| {
        holds(files, path)
            && source::stream(&folder.join(path), path, "comparing", |_| {})
                .is_ok_and(|hashed| hashed.sha256 == sha256)
    };
    for (path, content) in &made.files {
        if !same(path, &content.sha256()) {
            return Some(path.clone());
        }
    }
    if !same(SUMS, &source::sha256_hex(made.sums().as_bytes())) {
        return Some(SUMS.to_string());
    }
    let known = |path: &str| made.files.contains_key(path) || path == SUMS || path == RUN_JSON;
    files.iter().find(|(path, _)| !known(path)).map(|(path, _)| path.clone())
}

/// A file of the folder that its own SHA256SUMS does not know.
fn foreign_file(folder: &Path, files: &[(String, What)]) -> Option<String> {
    let sums = fs::read(folder.join(SUMS)).ok().and_then(|bytes| sums::read(&bytes).ok()).unwrap_or_default();
    let known = |path: &str| path == SUMS || path == RUN_JSON || sums.iter().any(|(own, _)| own == path);
    files.iter().find(|(path, _)| !known(path)).map(|(path, _)| path.clone())
}

/// A folder under construction; gone with everything in it unless it was moved to its place.
#[derive(Debug)]
struct Staging {
    path: PathBuf,
    lock: Option<File>,
    moved: bool,
    /// The folder of the reviews, where it was made for this one.
    new_out: Option<PathBuf>,
}

impl Staging {
    fn new(out: &Path, id: &str) -> Result<Staging, Fault> {
        let path = beside(out, id, "part");
        fs::create_dir(&path).map_err(|error| unwritable(&path, &error))?;
        let mut staging = Staging { path, lock: None, moved: false, new_out: None };
        let lock = staging.path.join(LOCK);
        let file = File::create_new(&lock).map_err(|error| unwritable(&lock, &error))?;
        // A file system without locks: the folder is written all the same.
        let _ = file.try_lock();
        staging.lock = Some(file);
        Ok(staging)
    }

    /// Moves the folder to its place; returns a replaced draft that could not be removed.
    fn move_to(mut self, folder: &Path, replaces: bool) -> Result<Option<PathBuf>, Fault> {
        let lock = self.path.join(LOCK);
        // Removed while still held: a folder without a lock file is nobody's left-over.
        fs::remove_file(&lock).map_err(|error| unwritable(&lock, &error))?;
        self.lock = None;
        let refused = |error: io::Error| unwritable(folder, &error);
        if !replaces {
            fs::rename(&self.path, folder).map_err(refused)?;
            self.moved = true;
            return Ok(None);
        }
        let name = folder.file_name().map(|name| name.to_string_lossy()).unwrap_or_default();
        let old = beside(folder.parent().unwrap_or_else(|| Path::new("")), &name, "old");
        fs::rename(folder, &old).map_err(refused)?;
        if let Err(error) = fs::rename(&self.path, folder) {
            // The old review goes back to its place; if even that fails, the message says where it is.
            let mut fault = refused(error);
            if fs::rename(&old, folder).is_err() {
                fault = fault.repair(format!("the former review is in {}: move it back", old.display()));
            }
            return Err(fault);
        }
        self.moved = true;
        Ok(fs::remove_dir_all(&old).is_err().then_some(old))
    }
}

impl Drop for Staging {
    fn drop(&mut self) {
        if !self.moved {
            self.lock = None;
            // Nothing more can be done where even removing fails.
            let _ = fs::remove_dir_all(&self.path);
            if let Some(out) = &self.new_out {
                // Refused unless it is empty.
                let _ = fs::remove_dir(out);
            }
        }
    }
}

/// A hidden path beside a review's place, different for every process.
fn beside(out: &Path, id: &str, what: &str) -> PathBuf {
    out.join(format!(".{id}.{what}-{}", std::process::id()))
}

/// Takes away what killed runs of this review left: hidden folders whose lock nobody holds.
fn clear_left_overs(out: &Path, id: &str) {
    let start = format!(".{id}.part-");
    let Ok(entries) = fs::read_dir(out) else { return };
    for entry in entries.flatten() {
        let is_folder = entry.file_type().is_ok_and(|kind| kind.is_dir());
        if !is_folder || !entry.file_name().to_string_lossy().starts_with(&start) {
            continue;
        }
        let lock = File::options().write(true).open(entry.path().join(LOCK));
        if lock.is_ok_and(|lock| lock.try_lock().is_ok()) {
            // What stays is as harmless as before.
            let _ = fs::remove_dir_all(entry.path());
        }
    }
}

fn put(folder: &Path, path: &str, content: &Content) -> Result<(), Fault> {
    let to = folder.join(path);
    if let Some(parent) = to.parent() {
        fs::create_dir_all(parent).map_err(|error| unwritable(parent, &error))?;
    }
    match content {
        Content::Bytes(bytes) => {
            let written = File::create_new(&to).and_then(|mut file| {
                file.write_all(bytes)?;
                file.flush()
            });
            written.map_err(|error| unwritable(&to, &error))
        }
        Content::Copy { from, written, sha256 } => {
            let hashed = source::copy_hashed(from, &to, written)?;
            if hashed.sha256 == *sha256 { Ok(()) } else { Err(changed(written)) }
        }
    }
}

fn unwritable(path: &Path, error: &io::Error) -> Fault {
    Fault::unreadable("unwritable-folder", format!("writing {}: {}", path.display(), error.kind()))
        .expected("a place that may be written to, with room for the review")
        .repair("look at the folder's permissions and the free space, or choose another --out")
}

/// Two reviews of one run that would stand in the same folder.
pub fn same_id(ids: &[(String, String)]) -> Option<Fault> {
    ids.iter().enumerate().find_map(|(place, (id, spec))| {
        let (_, other) = ids[..place].iter().find(|(known, _)| known.to_lowercase() == id.to_lowercase())?;
        Some(
            Fault::wrong("same-id", format!("{other} and {spec} both make the review {id}"))
                .expected("an id of its own for every review of a run")
                .repair("set `id` in [review] of one of them"),
        )
    })
}
