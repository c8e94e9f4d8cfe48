//! `check`: read spec and data, say everything that is wrong and what will be used; compute nothing.

use crate::cli::{CheckCall, DONE, core, screen::Screen};
use crate::data::{self, Data};
use crate::diagnostics::{Faults, Outcome};
use crate::plan::{Bounds, Plan};
use crate::review::Prepared;
use crate::stamp::audit::Again;
use crate::stamp::{Places, folder};

pub fn run(call: &CheckCall, screen: &mut Screen) -> Outcome<u8> {
    let mut faults = Faults::default();
    let mut ids = Vec::new();
    for spec in &call.specs {
        let shown = spec.to_string_lossy();
        let again = Again { spec: spec.clone(), places: Places::default() };
        let read = core::prepare(&again, &shown).and_then(|prepared| {
            let data = data::read(&prepared.plan)?;
            Ok((prepared, data))
        });
        match read {
            Ok((prepared, data)) => {
                say(&prepared, &data, &shown, screen);
                ids.push((prepared.plan.review.id.clone(), shown.into_owned()));
            }
            Err(more) => faults.extend(more),
        }
    }
    faults.0.extend(folder::same_id(&ids));
    faults.or(DONE)
}

fn say(prepared: &Prepared, data: &Data, shown: &str, screen: &mut Screen) {
    let plan = &prepared.plan;
    let review = &plan.review;
    screen.say(&format!("{shown}: nothing wrong was found"));
    screen.say(&format!("  review      {}, {} ({})", review.id, review.title, review.status.word()));
    screen.say(&format!("  period      {}, report of {}", review.period, review.date));
    let quantity = &plan.quantity;
    screen.say(&format!(
        "  quantity    {}, {}, {} scale",
        quantity.name,
        quantity.unit,
        quantity.scale.word()
    ));
    for limit in &plan.limits {
        let bounds = match limit.bounds {
            Bounds::Value(value) => format!("{value}"),
            Bounds::Range(lower, upper) => format!("{lower} to {upper}"),
        };
        screen.say(&format!("  limit       {} {bounds}: {}", limit.name, limit.basis));
    }
    for file in &data.files {
        screen.say(&format!("  data        {}, {} bytes, SHA-256 {}", file.written, file.bytes, file.sha256));
        for note in &file.notes {
            screen.say(&format!("              {note}"));
        }
    }
    let rows = &data.counts;
    screen.say(&format!(
        "  rows        {} read: {} used, {} not asked for, {} without a reading, {} excluded, {} after the last day",
        rows.read, rows.used, rows.other, rows.missing, rows.excluded, rows.later
    ));
    say_series(prepared, data, screen);
    for question in &plan.questions {
        let only = question.only.as_ref().map_or(String::new(), |only| format!(" (of {})", only.join(", ")));
        let rule = if question.rule.is_some() { ", with a rule" } else { "" };
        screen.say(&format!("  question    {}: {}{only}{rule}", question.id, question.ask));
    }
    for caution in &data.cautions {
        screen.say(&format!("  caution     {}", caution.text));
    }
    screen.say("");
}

fn say_series(prepared: &Prepared, data: &Data, screen: &mut Screen) {
    let plan: &Plan = &prepared.plan;
    let (reviewed, others) = prepared.reviewed(data);
    for name in &reviewed {
        let own = data.series.iter().find(|series| series.name == *name);
        let readings = own.and_then(|series| series.period(&plan.review.period)).map_or_else(
            || "no readings: prior-only answers".to_string(),
            |period| match period.facts.n {
                1 => "1 reading".to_string(),
                n => format!("{n} readings"),
            },
        );
        let periods: Vec<&str> = own.map_or(Vec::new(), |series| {
            series
                .periods
                .iter()
                .map(|data| data.period.as_str())
                .filter(|p| *p != plan.review.period.as_str())
                .collect()
        });
        let other = match periods.as_slice() {
            [] => "no other period".to_string(),
            [one] => format!("other period: {one}"),
            [first, .., last] => format!("{} other periods, {first} to {last}", periods.len()),
        };
        screen.say(&format!("  series      {name}: {readings}; {other}"));
    }
    for (name, last) in &others {
        screen.say(&format!("  not reviewed  {name}: last period {last}"));
    }
}
