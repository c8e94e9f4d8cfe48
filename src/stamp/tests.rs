//! Folders of a small review, written and audited for real: every file's every kind of change is found.

use crate::data::{Data, InputFile, RowCounts};
use crate::diagnostics::{Cause, Outcome};
use crate::findings::Findings;
use crate::plan;
use crate::report::Rendered;
use crate::source;
use crate::stamp::audit::{Again, Audit, Found, audit};
use crate::stamp::folder::{self, Written};
use crate::stamp::made::Content;
use crate::stamp::run_json::run_json;
use crate::stamp::{Made, Places, Texts};
use std::collections::BTreeMap;
use std::fs;
use std::path::{Path, PathBuf};
use std::process::Command;
use std::sync::atomic::{AtomicU32, Ordering};

/// A folder of its own for one test, gone when the test is.
struct Scratch(PathBuf);

impl Scratch {
    fn new() -> Scratch {
        static NEXT: AtomicU32 = AtomicU32::new(0);
        let number = NEXT.fetch_add(1, Ordering::Relaxed);
        let path = std::env::temp_dir().join(format!("reassay-stamp-{}-{number}", std::process::id()));
        fs::create_dir_all(&path).unwrap();
        Scratch(path)
    }

    fn put(&self, name: &str, text: &str) -> PathBuf {
        let path = self.0.join(name);
        fs::create_dir_all(path.parent().unwrap()).unwrap();
        fs::write(&path, text).unwrap();
        path
    }
}

impl Drop for Scratch {
    fn drop(&mut self) {
        let _ = fs::remove_dir_all(&self.0);
    }
}

fn spec_text(status: &str, inputs: &str) -> String {
    format!(
        "base = \"site.toml\"\n\
         [review]\ntitle = \"Wells\"\nperiod = 2025\ndate = 2026-01-20\nstatus = \"{status}\"\n\
         [[readings]]\nfile = [\"../data/a.csv\", \"../data/more/a.csv\"]\nvalue = \"x\"\n\
         [within]\nfrom = \"stated\"\nsd = 2.0\nbasis = \"duplicates\"\n\
         [prior]\nfrom = \"flat\"\n\
         [[question]]\nid = \"level\"\nask = \"level interval\"\n\
         [report]\ninputs = \"{inputs}\"\n"
    )
}

/// A review whose answers and report depend on every byte of the data, as a real one's do.
fn make(again: &Again) -> Outcome<Made> {
    let read = |path: &Path| source::whole(&again.places.real(path), &path.to_string_lossy(), "the spec");
    let mut plan = plan::load(&again.spec, "the spec", &read)?;
    again.places.redirect(&mut plan);
    let mut files = Vec::new();
    let mut weight = 0.0;
    for source in &plan.sources {
        let plan::Whence::Files(named) = &source.from else { continue };
        for file in named {
            let bytes = source::whole(&file.path, &file.written, "the readings")?;
            weight += bytes.iter().zip(1..).map(|(byte, at)| f64::from(*byte) * f64::from(at)).sum::<f64>();
            files.push(InputFile {
                written: file.written.clone(),
                path: file.path.clone(),
                sha256: source::sha256_hex(&bytes),
                bytes: bytes.len() as u64,
                notes: Vec::new(),
            });
        }
    }
    let data = Data {
        series: Vec::new(),
        periods: Vec::new(),
        files,
        excluded_rows: Vec::new(),
        rows_kept: true,
        counts: RowCounts::default(),
        cautions: Vec::new(),
    };
    let findings = Findings {
        compared: Vec::new(),
        checks_over_series: Vec::new(),
        wrong_verdicts: Vec::new(),
        settings: Vec::new(),
        plan,
        data,
        series: Vec::new(),
        not_reviewed: Vec::new(),
        across: Vec::new(),
        cautions: Vec::new(),
        quadrature_error: weight,
    };
    let texts = Texts { plan_toml: format!("# {weight}\n"), readings_csv: "series\n".into() };
    Made::of(&findings, texts, &|findings, stamp, inputs| {
        Ok(Rendered {
            markdown: format!("# {}\n\n{stamp}, {} inputs\n", findings.plan.review.title, inputs.len()),
            html: format!("<p>{}</p>\n", stamp.label()),
            figures: vec![("level.svg".into(), "<svg/>\n".into())],
        })
    })
}

/// Spec, base and data in their places, and the review of them.
fn made_in(scratch: &Scratch, status: &str, inputs: &str) -> (PathBuf, Made) {
    let spec = scratch.put("specs/W-2025.toml", &spec_text(status, inputs));
    scratch.put("specs/site.toml", "[quantity]\nname = \"nitrate\"\nunit = \"mg/L\"\n");
    scratch.put("data/a.csv", "x\n41.5\n");
    scratch.put("data/more/a.csv", "x\n42.5\n");
    let made = make(&Again { spec: spec.clone(), places: Places::default() }).unwrap();
    (spec, made)
}

fn write(scratch: &Scratch, spec: &Path, made: &Made) -> Outcome<Written> {
    let note = |folder: &Path| run_json(folder, spec, "2026-01-20T10:00:00Z");
    folder::ready(made, &scratch.0.join("reviews"), &note)?.place()
}

/// A review written in a fresh place.
fn written(status: &str, inputs: &str) -> (Scratch, PathBuf, PathBuf) {
    let scratch = Scratch::new();
    let (spec, made) = made_in(&scratch, status, inputs);
    let folder = write(&scratch, &spec, &made).unwrap().folder;
    (scratch, spec, folder)
}

fn all_bytes(folder: &Path) -> BTreeMap<String, Vec<u8>> {
    let files = super::listing::files(folder).unwrap();
    files.into_iter().map(|(path, _)| (path.clone(), fs::read(folder.join(&path)).unwrap())).collect()
}

/// The files named as different in any part.
fn named(audit: &Audit) -> Vec<String> {
    let differences = audit.parts.iter().filter_map(|(_, found)| match found {
        Found::Different(differences) => Some(differences),
        _ => None,
    });
    differences.flatten().map(|difference| difference.file.clone()).collect()
}

fn nothing_else_in_reviews(scratch: &Scratch) {
    let entries: Vec<String> = fs::read_dir(scratch.0.join("reviews"))
        .unwrap()
        .map(|entry| entry.unwrap().file_name().to_string_lossy().into_owned())
        .collect();
    assert_eq!(entries, ["W-2025"]);
}

#[test]
fn a_folder_holds_all_its_files_and_the_system_tool_agrees() {
    let (scratch, _, folder) = written("final", "copied");
    let names: Vec<String> = all_bytes(&folder).into_keys().collect();
    assert_eq!(
        names,
        [
            "SHA256SUMS",
            "answers.csv",
            "answers.json",
            "figures/level.svg",
            "handover.json",
            "inputs/a-2.csv",
            "inputs/a.csv",
            "inputs/site.toml",
            "plan.toml",
            "readings.csv",
            "report.html",
            "report.md",
            "run.json",
            "spec.toml",
            "stamp.json"
        ]
    );
    nothing_else_in_reviews(&scratch);
    let check = Command::new("sha256sum")
        .args(["-c", "--strict", "--quiet", "SHA256SUMS"])
        .current_dir(&folder)
        .output()
        .expect("coreutils' sha256sum is installed");
    assert!(check.status.success(), "{}", String::from_utf8_lossy(&check.stderr));
}

#[test]
fn the_stamp_is_the_hash_of_stamp_json_and_the_report_prints_it() {
    let (_scratch, _, folder) = written("final", "copied");
    let stamp = source::sha256_hex(&fs::read(folder.join("stamp.json")).unwrap());
    assert!(fs::read_to_string(folder.join("report.md")).unwrap().contains(&stamp));
}

#[test]
fn a_review_does_not_depend_on_its_place() {
    let (one, two) = (Scratch::new(), Scratch::new());
    let (_, mut made) = made_in(&one, "final", "copied");
    let (_, mut other) = made_in(&two, "final", "copied");
    for files in [&mut made.files, &mut other.files] {
        for content in files.values_mut() {
            if let Content::Copy { from, .. } = content {
                *from = PathBuf::new();
            }
        }
    }
    assert_eq!(made, other);
}

#[test]
fn an_untouched_folder_is_equal_in_every_part() {
    for inputs in ["copied", "hashed"] {
        for status in ["draft", "final"] {
            let (_scratch, _, folder) = written(status, inputs);
            let audit = audit(&folder, None, &make).unwrap();
            for (name, found) in &audit.parts {
                assert!(matches!(found, Found::Equal(_)), "{inputs} {status} {name}: {found:?}");
            }
        }
    }
}

#[test]
fn a_folder_is_audited_where_only_its_copies_are_left() {
    let (scratch, _, folder) = written("final", "copied");
    fs::remove_dir_all(scratch.0.join("specs")).unwrap();
    fs::remove_dir_all(scratch.0.join("data")).unwrap();
    let audit = audit(&folder, None, &make).unwrap();
    assert!(!audit.is_different() && !audit.is_incomplete(), "{audit:?}");
}

#[test]
fn hashed_inputs_that_are_gone_leave_parts_not_done_until_the_spec_is_named() {
    let (scratch, _, folder) = written("final", "hashed");
    fs::rename(scratch.0.join("specs"), scratch.0.join("archive")).unwrap();
    let lost = audit(&folder, None, &make).unwrap();
    assert!(!lost.is_different() && lost.is_incomplete(), "{lost:?}");
    let found = audit(&folder, Some(&scratch.0.join("archive/W-2025.toml")), &make).unwrap();
    assert!(!found.is_different() && !found.is_incomplete(), "{found:?}");
}

#[test]
fn every_flipped_byte_of_every_file_is_found_and_the_file_named() {
    for inputs in ["copied", "hashed"] {
        let (scratch, _, folder) = written("final", inputs);
        let places = ["specs/W-2025.toml", "specs/site.toml", "data/a.csv", "data/more/a.csv"];
        let mut files: Vec<(PathBuf, String)> = all_bytes(&folder)
            .into_keys()
            .filter(|path| path != "run.json")
            .map(|path| (folder.join(&path), path))
            .collect();
        files.extend(places.map(|place| (scratch.0.join(place), format!("../../{place}"))));
        for (path, name) in files {
            let whole = fs::read(&path).unwrap();
            // Every byte of a small file, every seventh of a larger one.
            for at in (0..whole.len()).step_by(if whole.len() > 300 { 7 } else { 1 }) {
                let mut flipped = whole.clone();
                flipped[at] ^= 1 << (at % 8);
                fs::write(&path, &flipped).unwrap();
                let audit = audit(&folder, None, &make).unwrap();
                assert!(audit.is_different(), "{inputs} {name} byte {at}");
                let names = named(&audit);
                assert!(names.contains(&name), "{inputs} {name} byte {at}: {names:?}");
            }
            fs::write(&path, &whole).unwrap();
        }
        assert!(!audit(&folder, None, &make).unwrap().is_different());
    }
}

#[test]
fn files_that_are_missing_cut_short_longer_new_or_links_are_named() {
    let (_scratch, _, folder) = written("final", "copied");
    for (path, bytes) in all_bytes(&folder).into_iter().filter(|(path, _)| path != "run.json") {
        let file = folder.join(&path);
        let longer = [bytes.as_slice(), b"\n"].concat();
        let shorter = bytes[..bytes.len() - 1].to_vec();
        for change in [Some(longer), Some(shorter), Some(Vec::new()), None] {
            match &change {
                Some(bytes) => fs::write(&file, bytes).unwrap(),
                None => fs::remove_file(&file).unwrap(),
            }
            let audit = audit(&folder, None, &make).unwrap();
            assert!(named(&audit).contains(&path), "{path}: {audit:?}");
        }
        fs::write(&file, &bytes).unwrap();
    }
    fs::write(folder.join("figures/more.svg"), "<svg/>").unwrap();
    assert!(named(&audit(&folder, None, &make).unwrap()).contains(&"figures/more.svg".to_string()));
    fs::remove_file(folder.join("figures/more.svg")).unwrap();
    #[cfg(unix)]
    {
        let kept = folder.parent().unwrap().join("kept.md");
        fs::rename(folder.join("report.md"), &kept).unwrap();
        std::os::unix::fs::symlink(&kept, folder.join("report.md")).unwrap();
        assert!(named(&audit(&folder, None, &make).unwrap()).contains(&"report.md".to_string()));
    }
}

#[test]
fn a_difference_says_where_and_by_how_much() {
    let (_scratch, _, folder) = written("final", "copied");
    let path = folder.join("answers.json");
    let text = fs::read_to_string(&path).unwrap();
    let number = text.split("\"quadrature_error\": ").nth(1).unwrap().split('}').next().unwrap().to_string();
    fs::write(&path, text.replace(&number, "1.5")).unwrap();
    let audit = audit(&folder, None, &make).unwrap();
    let Some((_, Found::Different(differences))) = audit.parts.iter().find(|(name, _)| *name == "answers")
    else {
        panic!("{audit:?}");
    };
    let what = &differences[0].what;
    assert!(
        what.starts_with(&format!("numerics.quadrature_error: 1.5 here, {number} made again (by ")),
        "{what}"
    );
}

#[test]
fn a_folder_that_is_no_review_is_refused() {
    let scratch = Scratch::new();
    assert_eq!(audit(&scratch.0, None, &make).unwrap_err().code, "not-a-review");
    let none = audit(&scratch.0.join("none"), None, &make).unwrap_err();
    assert_eq!((none.code, none.cause), ("unreadable-folder", Cause::Unreadable));
}

#[test]
fn a_final_review_is_not_overwritten_by_a_different_one() {
    let (scratch, spec, folder) = written("final", "copied");
    let before = all_bytes(&folder);
    let again =
        write(&scratch, &spec, &make(&Again { spec: spec.clone(), places: Places::default() }).unwrap());
    assert!(again.unwrap().already_there);
    scratch.put("data/a.csv", "x\n41.6\n");
    let different = make(&Again { spec: spec.clone(), places: Places::default() }).unwrap();
    let fault = write(&scratch, &spec, &different).unwrap_err().0.remove(0);
    assert_eq!(fault.code, "final-review");
    assert!(fault.repair.unwrap().contains("supersedes"), "the amendment is named");
    assert_eq!(all_bytes(&folder), before);
    nothing_else_in_reviews(&scratch);
}

#[test]
fn a_draft_is_replaced_whole() {
    let (scratch, spec, folder) = written("draft", "copied");
    scratch.put("specs/W-2025.toml", &spec_text("final", "hashed"));
    let made = make(&Again { spec: spec.clone(), places: Places::default() }).unwrap();
    assert!(!write(&scratch, &spec, &made).unwrap().already_there);
    assert!(!folder.join("inputs").exists(), "nothing of the draft is left");
    assert!(folder.join("handover.json").exists());
    nothing_else_in_reviews(&scratch);
}

#[test]
fn what_is_not_ours_is_not_overwritten() {
    let (scratch, spec, folder) = written("draft", "copied");
    let made = make(&Again { spec: spec.clone(), places: Places::default() }).unwrap();
    fs::write(folder.join("notes.txt"), "mine").unwrap();
    assert_eq!(write(&scratch, &spec, &made).unwrap_err().0[0].code, "folder-holds-more");
    fs::remove_dir_all(&folder).unwrap();
    fs::create_dir(&folder).unwrap();
    fs::write(folder.join("notes.txt"), "mine").unwrap();
    assert_eq!(write(&scratch, &spec, &made).unwrap_err().0[0].code, "folder-not-a-review");
    fs::remove_dir_all(&folder).unwrap();
    fs::write(&folder, "a file").unwrap();
    assert_eq!(write(&scratch, &spec, &made).unwrap_err().0[0].code, "folder-not-a-review");
    fs::remove_file(&folder).unwrap();
    #[cfg(unix)]
    {
        std::os::unix::fs::symlink(scratch.0.join("data"), &folder).unwrap();
        assert_eq!(write(&scratch, &spec, &made).unwrap_err().0[0].code, "folder-not-a-review");
        assert!(scratch.0.join("data/a.csv").exists());
    }
}

#[test]
fn a_write_that_fails_leaves_what_was_there() {
    let (scratch, spec, folder) = written("draft", "copied");
    let before = all_bytes(&folder);
    scratch.put("specs/W-2025.toml", &(spec_text("draft", "copied") + "# changed\n"));
    let made = make(&Again { spec: spec.clone(), places: Places::default() }).unwrap();
    // An input that changes after it was read cannot be copied as what it was.
    scratch.put("data/more/a.csv", "x\n0\n");
    assert_eq!(write(&scratch, &spec, &made).unwrap_err().0[0].code, "input-changed");
    fs::remove_file(scratch.0.join("data/more/a.csv")).unwrap();
    let gone = write(&scratch, &spec, &made).unwrap_err();
    assert_eq!(gone.0[0].cause, Cause::Unreadable);
    assert_eq!(all_bytes(&folder), before);
    nothing_else_in_reviews(&scratch);
    // In a place that did not exist, the place is gone again too.
    let elsewhere = scratch.0.join("elsewhere");
    assert!(folder::ready(&made, &elsewhere, &|_| Vec::new()).is_err());
    assert!(!elsewhere.exists());
}

#[test]
fn a_system_that_refuses_in_the_middle_is_told_and_leaves_nothing() {
    let scratch = Scratch::new();
    let (spec, mut made) = made_in(&scratch, "draft", "copied");
    // A file where a folder should be stands for a system that refuses in the middle of writing.
    made.files.insert("a".into(), Content::Bytes(Vec::new()));
    made.files.insert("a/b".into(), Content::Bytes(Vec::new()));
    let fault = write(&scratch, &spec, &made).unwrap_err().0.remove(0);
    assert_eq!((fault.code, fault.cause), ("unwritable-folder", Cause::Unreadable));
    assert!(!scratch.0.join("reviews").exists());
    // No folder can be made below a file.
    let fault = folder::ready(&made, &spec.join("reviews"), &|_| Vec::new()).unwrap_err().0.remove(0);
    assert_eq!((fault.code, fault.cause), ("unwritable-folder", Cause::Unreadable));
}

#[test]
fn what_a_killed_run_left_is_cleared_and_a_run_at_work_is_not() {
    let (scratch, spec, _) = written("draft", "copied");
    let reviews = scratch.0.join("reviews");
    let (dead, alive) = (reviews.join(".W-2025.part-1"), reviews.join(".W-2025.part-2"));
    for folder in [&dead, &alive] {
        fs::create_dir(folder).unwrap();
    }
    fs::write(dead.join(".lock"), "").unwrap();
    let held = fs::File::create(alive.join(".lock")).unwrap();
    held.try_lock().unwrap();
    let made = make(&Again { spec: spec.clone(), places: Places::default() }).unwrap();
    write(&scratch, &spec, &made).unwrap();
    assert!(!dead.exists() && alive.exists());
}

#[test]
fn two_reviews_of_one_run_need_two_ids() {
    let pair = |id: &str, spec: &str| (id.to_string(), spec.to_string());
    assert_eq!(folder::same_id(&[pair("A", "a.toml"), pair("B", "b.toml")]), None);
    let fault = folder::same_id(&[pair("A", "a.toml"), pair("a", "b.toml")]).unwrap();
    assert_eq!(fault.message, "a.toml and b.toml both make the review a");
}
