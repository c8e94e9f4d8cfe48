//! The inputs of an audited review: each against stamp.json, in the folder first, then in the place
//! where it lay; and where each is to be read when the review is made again.

use crate::json::At;
use crate::json::Json;
use crate::source;
use crate::stamp::audit::{Again, Difference, Found};
use crate::stamp::made::{RUN_JSON, SPEC_TOML, STAMP_JSON};
use crate::stamp::places::Places;
use crate::stamp::run_json;
use crate::stamp::stamp_json::{FORMAT, VERSION};
use std::fs;
use std::path::{Path, PathBuf};

/// What the folder says of its inputs.
#[derive(Debug)]
pub struct Ground {
    folder: PathBuf,
    /// Where the spec lay: named by the user, or by run.json.
    spec_place: Option<PathBuf>,
    /// The same, for messages.
    spec_shown: String,
    id: String,
    version: String,
    spec_sha256: String,
    inputs: Vec<Stamped>,
}

/// An input as stamp.json has it.
#[derive(Debug)]
struct Stamped {
    written: String,
    kept: Option<String>,
    sha256: String,
}

impl Ground {
    /// Reads stamp.json and run.json of a folder, or says why that is not possible.
    pub fn of(folder: &Path, spec: Option<&Path>) -> Result<Ground, String> {
        let bytes = fs::read(folder.join(STAMP_JSON))
            .map_err(|error| format!("{STAMP_JSON} cannot be read: {}", error.kind()))?;
        let wrong = |why: String| format!("{STAMP_JSON} cannot be read: {why}");
        let stamp = Json::read(&bytes).map_err(wrong)?;
        let place = match spec {
            Some(spec) => Some((spec.to_path_buf(), spec.display().to_string())),
            None => fs::read(folder.join(RUN_JSON))
                .ok()
                .and_then(|bytes| run_json::spec_place(&bytes))
                .map(|way| (folder.join(&way), way)),
        };
        let (spec_place, spec_shown) = place.unzip();
        let mut ground = Ground {
            folder: folder.to_path_buf(),
            spec_place,
            spec_shown: spec_shown.unwrap_or_default(),
            id: String::new(),
            version: String::new(),
            spec_sha256: String::new(),
            inputs: Vec::new(),
        };
        ground.read(&At::root(&stamp)).map_err(wrong)?;
        Ok(ground)
    }

    fn read(&mut self, stamp: &At<'_>) -> Result<(), String> {
        let format = stamp.key("format")?;
        if format.as_text()? != FORMAT {
            return Err(format.fault(&format!("\"{FORMAT}\"")));
        }
        self.id = stamp.key("review")?.text("id")?.to_string();
        self.version = stamp.key("program")?.text("version")?.to_string();
        self.spec_sha256 = stamp.key("spec")?.text("sha256")?.to_string();
        self.inputs = stamp.each("inputs", |at| {
            Ok(Stamped {
                written: at.text("written")?.to_string(),
                kept: at.maybe("kept").map(|kept| kept.as_text().map(str::to_string)).transpose()?,
                sha256: at.text("sha256")?.to_string(),
            })
        })?;
        Ok(())
    }

    /// Where an input lay, as far as the spec's place is known, and that place in words.
    fn origin(&self, written: &str) -> Option<(PathBuf, String)> {
        let folder = self.spec_place.as_ref()?.parent()?;
        let shown = match self.spec_shown.rfind('/') {
            Some(at) if !written.starts_with('/') => {
                straight(&format!("{}{written}", &self.spec_shown[..=at]))
            }
            _ => written.to_string(),
        };
        Some((folder.join(written), shown))
    }
}

/// A path for the eye, without `folder/..`.
fn straight(path: &str) -> String {
    let mut parts: Vec<&str> = Vec::new();
    for part in path.split('/') {
        match (part, parts.last()) {
            (".", Some(_)) => {}
            ("..", Some(last)) if !matches!(*last, ".." | "." | "") => {
                parts.pop();
            }
            _ => parts.push(part),
        }
    }
    parts.join("/")
}

/// One look at a file that should have a hash.
enum Look {
    Equal,
    Different(String),
    Missing,
    Unread(String),
}

fn look(path: &Path, shown: &str, sha256: &str) -> Look {
    if !path.exists() {
        return Look::Missing;
    }
    match source::stream(path, shown, "hashing", |_| {}) {
        Err(fault) => Look::Unread(fault.message),
        Ok(hashed) if hashed.sha256 == sha256 => Look::Equal,
        Ok(hashed) => {
            let only_line_ends = source::hashes_by_line_end(path, shown)
                .is_ok_and(|hashes| hashes.iter().any(|hash| hash == sha256));
            let also = if only_line_ends { "; only its line ends differ" } else { "" };
            Look::Different(format!("its SHA-256 is {}, {STAMP_JSON} says {sha256}{also}", hashed.sha256))
        }
    }
}

/// What was found while looking at all inputs.
#[derive(Default)]
struct Seen {
    differences: Vec<Difference>,
    /// Inputs that are nowhere, or cannot be read.
    missing: Vec<String>,
    equal_here: usize,
    equal_there: usize,
    not_there: usize,
}

/// The part `inputs`, and what is to be made again (or why it cannot be).
pub fn inputs(ground: &Ground) -> (Found, Result<Again, String>) {
    let mut seen = Seen::default();
    let mut places = Places::default();
    // The spec gets a name that gives the review its id, in no folder: the files that it names are then
    // looked up by the very text that names them.
    let spec = PathBuf::from(format!("{}.toml", ground.id));

    let kept = ground.folder.join(SPEC_TOML);
    let origin = ground.spec_place.as_ref().map(|place| (place.clone(), ground.spec_shown.clone()));
    let real = seen.one(&kept, Some(SPEC_TOML), origin, SPEC_TOML, &ground.spec_sha256);
    if let Some(real) = real {
        places.put(&spec, real);
    }
    for input in &ground.inputs {
        let kept = input.kept.as_deref();
        let path = ground.folder.join(kept.unwrap_or_default());
        let origin = ground.origin(&input.written);
        if let Some(real) = seen.one(&path, kept, origin, &input.written, &input.sha256) {
            places.put(&input.written, real);
        }
    }
    let again = match seen.missing.first() {
        Some(missing) => Err(format!("it cannot be made again: {missing}")),
        None => Ok(Again { spec, places }),
    };
    (seen.found(ground), again)
}

impl Seen {
    /// Looks at one input in the folder and in its place; gives the path from which it can be read.
    fn one(
        &mut self,
        path: &Path,
        kept: Option<&str>,
        origin: Option<(PathBuf, String)>,
        name: &str,
        sha256: &str,
    ) -> Option<PathBuf> {
        let mut real = None;
        let mut trouble = None;
        if let Some(kept) = kept {
            match look(path, kept, sha256) {
                Look::Equal => {
                    self.equal_here += 1;
                    real = Some(path.to_path_buf());
                }
                Look::Different(what) => {
                    self.differences.push(Difference::new(kept, what));
                    real = Some(path.to_path_buf());
                }
                Look::Missing => self.differences.push(Difference::new(kept, "missing")),
                Look::Unread(why) => trouble = Some(why),
            }
        }
        if let Some((place, shown)) = origin {
            match look(&place, &shown, sha256) {
                Look::Equal => {
                    self.equal_there += 1;
                    real = real.or(Some(place));
                }
                Look::Different(what) => {
                    self.differences.push(Difference::new(shown, what));
                    real = real.or(Some(place));
                }
                Look::Missing => self.not_there += 1,
                Look::Unread(why) => trouble = trouble.or(Some(why)),
            }
        } else {
            self.not_there += 1;
        }
        match (trouble, &real) {
            (Some(why), _) => self.missing.push(why),
            (None, None) => self.missing.push(format!("{name} was not found; name its spec with --spec")),
            (None, Some(_)) => {}
        }
        real
    }

    fn found(self, ground: &Ground) -> Found {
        if !self.differences.is_empty() {
            return Found::Different(self.differences);
        }
        if let Some(why) = self.missing.into_iter().next() {
            return Found::NotDone(why);
        }
        let mut words = Vec::new();
        if self.equal_here > 0 {
            words.push(format!("{} in the folder", self.equal_here));
        }
        if self.equal_there > 0 {
            words.push(format!("{} in their places", self.equal_there));
        }
        if self.not_there > 0 {
            words.push(format!("{} not found in their places", self.not_there));
        }
        let version = if ground.version == VERSION {
            String::new()
        } else {
            format!("; made by version {}, audited by {VERSION}", ground.version)
        };
        Found::Equal(format!("spec and inputs as {STAMP_JSON} says: {}{version}", words.join(", ")))
    }
}
