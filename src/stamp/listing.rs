//! The files of a folder, for comparing them with a list.

use std::fs;
use std::io;
use std::path::Path;

/// What lies at a path of a folder.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum What {
    File,
    /// A link, a device or the like: never part of a review.
    Other,
}

/// All files below a folder, sorted by path, with `/`. Links are listed, not followed; folders are not
/// listed themselves.
pub fn files(folder: &Path) -> io::Result<Vec<(String, What)>> {
    let mut found = Vec::new();
    below(folder, "", &mut found)?;
    found.sort();
    Ok(found)
}

fn below(folder: &Path, before: &str, found: &mut Vec<(String, What)>) -> io::Result<()> {
    for entry in fs::read_dir(folder)? {
        let entry = entry?;
        let kind = entry.file_type()?;
        let path = format!("{before}{}", entry.file_name().to_string_lossy());
        if kind.is_dir() {
            below(&entry.path(), &format!("{path}/"), found)?;
        } else {
            found.push((path, if kind.is_file() { What::File } else { What::Other }));
        }
    }
    Ok(())
}
