//! From a spec's path to a plan: read it, put its base beneath it, and make the plan of both.

use crate::diagnostics::{Fault, Faults, Outcome};
use crate::plan::{Plan, SpecFile, make};
use crate::spec::reader::Reader;
use crate::spec::table::{Entry, Kind, Table};
use crate::spec::{self, Spec, language};
use std::path::{Path, PathBuf};

/// How spec files are read: the caller gives the bytes of a path, so that the plan itself touches no
/// disk.
pub type ReadBytes<'a> = dyn Fn(&Path) -> Result<Vec<u8>, Fault> + 'a;

/// Reads the spec at `spec_path` (and its base, where it names one) and makes its plan.
/// `shown_name` is the spec's name in messages: its path as the user gave it.
///
/// All faults that can be found without the data are returned together.
pub fn load(spec_path: &Path, shown_name: &str, read: &ReadBytes<'_>) -> Outcome<Plan> {
    let bytes = read(spec_path)?;
    let mut faults = Faults::default();
    let Some(spec) = spec::read_on(&bytes, shown_name, &mut faults) else { return Err(faults) };
    let mut files = vec![SpecFile { name: shown_name.to_string(), path: spec_path.to_path_buf(), bytes }];
    let folder = spec_path.parent().map(Path::to_path_buf).unwrap_or_default();
    let mut ground = make::Ground {
        folder,
        spec_text: spec.text.clone(),
        base_folder: String::new(),
        spec_stem: stem(spec_path),
        faults: Faults::default(),
    };
    let root = match base_of(&spec, &ground.folder, shown_name, read, &mut faults) {
        Some((base, file, written)) => {
            ground.base_folder = parent_of(&written);
            files.push(file);
            beneath(spec.root, base.root)
        }
        None => spec.root,
    };
    ground.faults = faults;
    make::plan(&root, ground, files)
}

/// The file name without its ending.
fn stem(path: &Path) -> String {
    path.file_stem().map(|stem| stem.to_string_lossy().into_owned()).unwrap_or_default()
}

/// `shared/` of `shared/site.toml`; empty where there is no folder.
fn parent_of(written: &str) -> String {
    written.rfind('/').map_or(String::new(), |at| written[..=at].to_string())
}

/// The base that a spec names, its file, and its path as written.
fn base_of(
    spec: &Spec,
    folder: &Path,
    shown_name: &str,
    read: &ReadBytes<'_>,
    faults: &mut Faults,
) -> Option<(Spec, SpecFile, String)> {
    let mut reader = Reader::new(&spec.root, language::TOP, faults);
    let written = reader.text("base")?;
    let place = reader.span("base").place();
    if let Err(fault) = make::usable_name(&written) {
        reader.fault_at("base", fault);
        return None;
    }
    let path: PathBuf = folder.join(&written);
    // The base's name in messages stands beside the spec's own.
    let name = format!("{}{written}", parent_of(shown_name));
    let bytes = match read(&path) {
        Ok(bytes) => bytes,
        Err(fault) => {
            faults.push(fault.at(place));
            return None;
        }
    };
    let base = spec::read_on(&bytes, &name, faults)?;
    if let Some(entry) = base.root.entries.iter().find(|entry| entry.key == "base") {
        faults.push(
            Fault::wrong("base-of-a-base", format!("{name} is a base and names a base itself"))
                .at(entry.key_span.place())
                .expected("one level: a spec and its base")
                .repair("bring both bases together in one file"),
        );
    }
    let file = SpecFile { name, path, bytes };
    Some((base, file, written))
}

/// What the spec leaves out, from the base: whole tables, and single keys of tables that both have.
/// Lists are taken whole. Limits and series are tables of tables, so one level more is looked at.
fn beneath(spec: Table, base: Table) -> Table {
    let mut merged = spec;
    for theirs in base.entries {
        match merged.entries.iter_mut().find(|own| own.key == theirs.key) {
            None => merged.entries.push(theirs),
            Some(own) => fill(own, theirs),
        }
    }
    merged
}

fn fill(own: &mut Entry, theirs: Entry) {
    let nested = matches!(own.key.as_str(), "limit" | "series");
    let (Kind::Table(mine), Kind::Table(base)) = (&mut own.value.kind, theirs.value.kind) else { return };
    // A source of its own replaces, as everywhere in the language.
    if mine.get("from").is_some() {
        return;
    }
    // A limit's value, or its two ends, belong together.
    let bounds = ["value", "lower", "upper"];
    let own_bounds = bounds.iter().any(|key| mine.get(key).is_some());
    for theirs in base.entries {
        match mine.entries.iter_mut().find(|entry| entry.key == theirs.key) {
            Some(entry) if nested => fill(entry, theirs),
            Some(_) => {}
            None if own_bounds && bounds.contains(&theirs.key.as_str()) => {}
            None => mine.entries.push(theirs),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::diagnostics::render::{Look, render};

    fn read(path: &Path) -> Result<Vec<u8>, Fault> {
        std::fs::read(path).map_err(|error| Fault::unreadable("file", format!("{}: {error}", path.display())))
    }

    #[test]
    fn every_example_spec_makes_a_plan() {
        let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("specs");
        let mut count = 0;
        for entry in std::fs::read_dir(folder).unwrap() {
            let path = entry.unwrap().path();
            if path.extension().is_some_and(|ending| ending == "toml") {
                let name = path.file_name().unwrap().to_string_lossy().into_owned();
                if let Err(faults) = load(&path, &name, &read) {
                    panic!("{name}\n{}", render(&faults, Look::default()));
                }
                count += 1;
            }
        }
        assert!(count > 50, "only {count} specs were found");
    }
}
