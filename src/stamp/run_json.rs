//! run.json: when a review was made, and where its spec lay as seen from its folder. The only file
//! outside hashes and byte identity; it names no user and no host.

use crate::json::{Json, Object};
use crate::stamp::stamp_json::{PROGRAM, VERSION};
use std::fs;
use std::path::{Component, Path, PathBuf};

pub const FORMAT: &str = "reassay-run/1";

/// The bytes of run.json for a review in `folder` (whose parent exists) made from `spec`; `ran` is the
/// time, UTC.
pub fn run_json(folder: &Path, spec: &Path, ran: &str) -> Vec<u8> {
    let object =
        Object::new().text("format", FORMAT).text("program", format!("{PROGRAM} {VERSION}")).text("ran", ran);
    match way(folder, spec) {
        Some(way) => object.text("spec", way),
        None => object.absent("spec", "no relative path leads from this folder to the spec"),
    }
    .done()
    .to_file()
}

/// The place of the spec that a run.json names, if it does; relative to the folder.
pub fn spec_place(run_json: &[u8]) -> Option<String> {
    Json::read(run_json).ok()?.get("spec")?.as_text().map(str::to_string)
}

/// The relative path from a folder to a file, with `/`.
fn way(folder: &Path, file: &Path) -> Option<String> {
    let real = |path: &Path| {
        let parent = path.parent().filter(|parent| !parent.as_os_str().is_empty());
        let parent = fs::canonicalize(parent.unwrap_or_else(|| Path::new("."))).ok()?;
        Some(parent.join(path.file_name()?))
    };
    let (from, to): (PathBuf, PathBuf) = (real(folder)?, real(file)?);
    let (from, to): (Vec<_>, Vec<_>) = (from.components().collect(), to.components().collect());
    let shared = from.iter().zip(&to).take_while(|(a, b)| a == b).count();
    let up = from[shared..].iter().map(|_| "..".to_string());
    let down = to[shared..].iter().map(|part| part.as_os_str().to_string_lossy().into_owned());
    // A different root (a drive) cannot be reached by going up.
    let rooted = to[shared..].iter().any(|part| matches!(part, Component::RootDir | Component::Prefix(_)));
    (!rooted).then(|| up.chain(down).collect::<Vec<_>>().join("/"))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_spec_is_found_from_the_folder() {
        let root = std::env::temp_dir().join(format!("reassay-run-{}", std::process::id()));
        fs::create_dir_all(root.join("reviews")).unwrap();
        fs::create_dir_all(root.join("specs")).unwrap();
        let bytes = run_json(&root.join("reviews/A"), &root.join("specs/a.toml"), "2026-01-20T10:00:00Z");
        assert_eq!(spec_place(&bytes).as_deref(), Some("../../specs/a.toml"));
        assert!(!String::from_utf8(bytes).unwrap().contains("reassay-run-"));
        fs::remove_dir_all(root).unwrap();
    }
}
