//! `audit`: hash again, compute again, render again, compare; say what differs.

use crate::cli::{AuditCall, DONE, FOUND, UNREADABLE, core, jobs, screen::Screen};
use crate::diagnostics::{Fault, Faults, Outcome};
use crate::stamp::audit::{self, Again, Audit, Found};

/// Differences listed per part; the rest are counted.
const LISTED: usize = 12;

pub fn run(call: &AuditCall, screen: &mut Screen) -> Outcome<u8> {
    if call.spec.is_some() && call.folders.len() > 1 {
        return Err(Fault::wrong("one-folder-a-spec", "--spec is the place of one review's spec")
            .expected("one FOLDER with --spec")
            .repair("audit the folders one by one")
            .into());
    }
    let make = |again: &Again| {
        core::make(again, &again.spec.to_string_lossy(), jobs(call.jobs)).map(|(_, made)| made)
    };
    let mut faults = Faults::default();
    let (mut different, mut incomplete) = (false, false);
    for folder in &call.folders {
        match audit::audit(folder, call.spec.as_deref(), &make) {
            Ok(audit) => {
                say(&folder.to_string_lossy(), &audit, screen);
                different |= audit.is_different();
                incomplete |= audit.is_incomplete();
            }
            Err(fault) => faults.push(fault),
        }
    }
    // A difference is the graver news: it is not hidden behind a part that could not be done.
    let status = match (different, incomplete) {
        (true, _) => FOUND,
        (false, true) => UNREADABLE,
        (false, false) => DONE,
    };
    if different && !faults.is_empty() {
        screen.faults(&faults);
        return Ok(status);
    }
    faults.or(status)
}

fn say(folder: &str, audit: &Audit, screen: &mut Screen) {
    screen.say(folder);
    for (name, found) in &audit.parts {
        match found {
            Found::Equal(what) => screen.say(&format!("  {name:<8}equal      {what}")),
            Found::NotDone(why) => screen.say(&format!("  {name:<8}not done   {why}")),
            Found::Different(differences) => {
                let (files, verb) =
                    if differences.len() == 1 { ("file", "differs") } else { ("files", "differ") };
                screen.say(&format!("  {name:<8}different  {} {files} {verb}:", differences.len()));
                for difference in differences.iter().take(LISTED) {
                    screen.say(&format!("    {}: {}", difference.file, difference.what));
                }
                if differences.len() > LISTED {
                    screen.say(&format!("    and {} more", differences.len() - LISTED));
                }
            }
        }
    }
    let or_none = |hash: &Option<String>| hash.clone().unwrap_or_else(|| "none".to_string());
    screen.say(&format!("  stamp       {}", or_none(&audit.stamp)));
    screen.say(&format!("  SHA256SUMS  {}", or_none(&audit.sums)));
    screen.say("");
}
