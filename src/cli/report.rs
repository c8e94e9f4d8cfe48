//! `report`: compute, render and stamp; one folder a review.
//!
//! All reviews are computed before the first is written, and all are written beside their places before
//! the first is moved: a fault in one leaves none half-done.

use crate::cli::{DONE, FOUND, ReportCall, answers, core, jobs, screen::Screen};
use crate::diagnostics::{Faults, Outcome};
use crate::findings::Findings;
use crate::questions::rule::Given;
use crate::source::sha256_hex;
use crate::stamp::audit::Again;
use crate::stamp::folder::{self, Ready, Written};
use crate::stamp::{Made, Places, run_json};

pub fn run(call: &ReportCall, screen: &mut Screen) -> Outcome<u8> {
    let mut faults = Faults::default();
    let mut made = Vec::new();
    for spec in &call.specs {
        let again = Again { spec: spec.clone(), places: Places::default() };
        match core::make(&again, &spec.to_string_lossy(), jobs(call.jobs)) {
            Ok(one) => made.push((spec.as_path(), one)),
            Err(more) => faults.extend(more),
        }
    }
    let ids: Vec<(String, String)> =
        made.iter().map(|(spec, (_, made))| (made.id.clone(), spec.to_string_lossy().into_owned())).collect();
    faults.0.extend(folder::same_id(&ids));
    let made = faults.or(made)?;

    let ran = now();
    let ready: Vec<Ready> = made
        .iter()
        .map(|(spec, (_, made))| {
            folder::ready(made, &call.out, &|folder| run_json::run_json(folder, spec, &ran))
        })
        .collect::<Outcome<_>>()?;
    let mut status = DONE;
    for (ready, (_, (findings, made))) in ready.into_iter().zip(&made) {
        let written = ready.place()?;
        say(findings, made, &written, screen);
        if verdicts(findings).any(|given| given.fail) {
            status = FOUND;
        }
    }
    Ok(status)
}

/// Every verdict of a review.
fn verdicts(findings: &Findings) -> impl Iterator<Item = &Given> {
    let own = findings.series.iter().flat_map(|series| &series.answers).filter_map(|a| a.verdict.as_ref());
    own.chain(findings.across.iter().filter_map(|across| across.verdict.as_ref()))
}

fn say(findings: &Findings, made: &Made, written: &Written, screen: &mut Screen) {
    answers::say(findings, screen);
    let there = if written.already_there { " (was there already, the same)" } else { "" };
    screen.say("");
    screen.say(&format!("folder      {}{there}", written.folder.display()));
    screen.say(&format!("stamp       {}", made.stamp));
    screen.say(&format!("label       {}", made.stamp.label()));
    screen.say(&format!("SHA256SUMS  {}", sha256_hex(made.sums().as_bytes())));
    screen.say("");
    if let Some(left) = &written.left_over {
        screen.remark(&format!(
            "caution: the draft that was replaced could not be removed: {}",
            left.display()
        ));
    }
}

/// The time, UTC, for run.json alone: no other file knows the clock.
#[expect(clippy::disallowed_methods, reason = "run.json records when it ran, and is outside all hashes")]
fn now() -> String {
    let seconds = std::time::SystemTime::now()
        .duration_since(std::time::UNIX_EPOCH)
        .map_or(0, |since| i64::try_from(since.as_secs()).unwrap_or(0));
    jiff::Timestamp::from_second(seconds).map_or_else(|_| String::new(), |time| time.to_string())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_time_is_utc_to_the_second() {
        let time = now();
        assert_eq!(time.len(), "2026-01-20T10:00:00Z".len(), "{time}");
        assert!(time.ends_with('Z'));
    }
}
