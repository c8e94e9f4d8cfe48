//! All sources of a plan, in the order of the spec.

use super::cell::{Codes, Reader, Refused, Understood};
use super::columns::{list, nearest, never_both};
use super::delimited;
use super::fault_list::FaultList;
use super::finish;
use super::gather::{Gather, IDS_COMPARED_AT_MOST, Observed, Row};
use super::number;
use super::order;
use super::screen::{self, Screen};
use super::summaries::{self, SummaryScreen};
use super::{Data, Fate, InputFile, Mark, SeriesData};
use crate::diagnostics::{Caution, Fault, Outcome};
use crate::plan::{Coverage, FileRef, NumberOrColumn, PeriodOf, Plan, SeriesOf, Source, SourceKind, Whence};
use crate::quantity::{Period, Scale, natural_order};
use crate::source;
use crate::spec::table::Span;
use std::collections::BTreeMap;

/// Reads everything that the plan names, screens it, and leaves sums and readings per series and
/// period. All that is wrong with the data is found in this one pass.
pub fn read(plan: &Plan) -> Outcome<Data> {
    let mut faults = FaultList::default();
    let mut gather = Gather::new(plan);
    let mut heads = Vec::new();
    for source in &plan.sources {
        match &source.from {
            Whence::Files(files) => {
                let mut taken = 0;
                let before = faults.count();
                for file in files {
                    taken += read_file(plan, source, file, &mut gather, &mut heads, &mut faults).unwrap_or(0);
                }
                if taken == 0 && faults.count() == before {
                    faults.push(nothing_taken(source));
                }
            }
            Whence::Values { values, uncertainties } => {
                read_values(plan, source, values, uncertainties.as_deref(), &mut gather, &mut faults);
            }
            Whence::Rows(rows) => summaries::inline(rows, source, &mut gather, &mut faults),
        }
    }
    refuse_the_same_twice(plan, &gather, &mut faults);
    refuse_readings_beside_summary(&gather, &mut faults);
    finish::refuse_lost_singles(&gather, &mut faults);
    if heads.iter().all(Option::is_some) {
        judge_exclusions(plan, &gather, &heads, &mut faults);
    }
    let periods = match order::periods(&gather, plan) {
        Ok(periods) => periods,
        Err(fault) => {
            faults.push(fault.at(plan.sources.first().map(|source| source.span.place())));
            Vec::new()
        }
    };
    if !faults.is_empty() {
        return Err(faults.into_faults());
    }
    Ok(assemble(gather, periods))
}

/// Reads one file; the number of rows taken, or `None` where it was refused.
fn read_file(
    plan: &Plan,
    source: &Source,
    file: &FileRef,
    gather: &mut Gather,
    heads: &mut Vec<Option<Vec<String>>>,
    faults: &mut FaultList,
) -> Option<u64> {
    let known = gather.files.iter().position(|known| known.path == file.path);
    let number = known.unwrap_or(gather.files.len());
    if known.is_none() {
        gather.files.push(InputFile {
            written: file.written.clone(),
            path: file.path.clone(),
            sha256: String::new(),
            bytes: 0,
            notes: Vec::new(),
        });
    }
    heads.push(None);
    let mut names = None;
    let (hashed, mut notes, result) = match &source.what {
        SourceKind::Readings { .. } => {
            let read = delimited::read(source.into(), file, faults, |head, faults| {
                names = Some(head.names.clone());
                Screen::new(head, source, plan, gather, number, faults)
            });
            match read {
                Ok(read) => {
                    let result =
                        read.rows.map(|screen| (screen.taken, screen.blank_rows, Some(screen.codes)));
                    (read.hashed, read.notes, result)
                }
                Err(fault) => {
                    faults.push(fault.at(file.span.place()));
                    return None;
                }
            }
        }
        SourceKind::Summaries(_) => {
            let read = delimited::read(source.into(), file, faults, |head, faults| {
                names = Some(head.names.clone());
                SummaryScreen::new(head, source, plan, gather, faults)
            });
            match read {
                Ok(read) => {
                    let result = read.rows.map(|screen| (screen.taken, screen.blank_rows, None));
                    (read.hashed, read.notes, result)
                }
                Err(fault) => {
                    faults.push(fault.at(file.span.place()));
                    return None;
                }
            }
        }
    };
    if let Some(pinned) = &file.sha256
        && *pinned != hashed.sha256
    {
        faults.push(other_bytes(file, pinned, &hashed.sha256));
    }
    let input = &mut gather.files[number];
    if known.is_some() && input.sha256 != hashed.sha256 {
        faults.push(
            Fault::unreadable("file-changed", format!("{} changed while it was read", file.written))
                .at(file.span.place())
                .repair("run again when nothing writes to the file"),
        );
    }
    input.sha256 = hashed.sha256;
    input.bytes = hashed.bytes;
    if let Some((_, blank, _)) = &result
        && *blank > 0
    {
        notes.push(if *blank == 1 { "1 blank line".to_string() } else { format!("{blank} blank lines") });
    }
    for note in notes {
        if !input.notes.contains(&note) {
            input.notes.push(note);
        }
    }
    let (taken, _, codes) = result?;
    if let Some(head) = heads.last_mut() {
        *head = names;
    }
    if let Some(codes) = codes {
        codes.judge(faults);
    }
    Some(taken)
}

pub fn other_bytes(file: &FileRef, pinned: &str, found: &str) -> Fault {
    let only_line_ends = source::hashes_by_line_end(&file.path, &file.written)
        .is_ok_and(|hashes| hashes.iter().any(|hash| hash == pinned));
    let message = format!("{} is not the file that the spec pins: its SHA-256 is {found}", file.written);
    let fault = Fault::wrong("hash-differs", message).at(file.span.place()).expected(pinned);
    if only_line_ends {
        fault.repair("only the line ends differ: fetch the file without conversion of line ends")
    } else {
        fault.repair("restore the file, or pin the new hash if the change is meant")
    }
}

fn nothing_taken(source: &Source) -> Fault {
    let fault = if source.rows_where.is_empty() {
        Fault::wrong("no-rows", "there is no row below the head")
    } else {
        Fault::wrong("no-rows", "no row meets the condition of `where`")
            .repair("compare its texts with the file's, letter by letter")
    };
    fault.at(source.span.place()).expected("at least one row")
}

/// Values written in the spec: the same screen, without columns.
fn read_values(
    plan: &Plan,
    source: &Source,
    values: &[(String, Span)],
    uncertainties: Option<&[f64]>,
    gather: &mut Gather,
    faults: &mut FaultList,
) {
    let SourceKind::Readings { coverage, marks, .. } = &source.what else {
        return;
    };
    // The plan gives values in the spec one series and one period, and as many uncertainties as values.
    let (SeriesOf::Always(series), PeriodOf::Always(period)) = (&source.series, &source.period) else {
        return;
    };
    let factor = match coverage {
        Coverage::Factor(factor) => *factor,
        Coverage::Column(_) => 1.0,
    };
    let reader = Reader::new(marks, source);
    let scale = plan.quantity.scale;
    let cell = gather.cell(Period::new(series).as_str(), period);
    let mut codes = Codes::default();
    for (i, (text, span)) in values.iter().enumerate() {
        gather.counts.read += 1;
        let trimmed = text.trim();
        let understood = reader.understand(trimmed.as_bytes(), None);
        let (value, mark, decimals) = match understood {
            Ok(Understood::Missing) => (None, Mark::None, 0),
            Ok(Understood::Number { value, decimals }) => (Some(value), Mark::None, decimals),
            Ok(Understood::Marked { mark, limit: Some(limit), decimals }) => (Some(limit), mark, decimals),
            Ok(Understood::Marked { mark, limit: None, .. }) => match &marks.limit {
                Some(NumberOrColumn::Number(limit)) => (Some(*limit), mark, 0),
                _ => {
                    faults.push(screen::mark_without_limit().at(span.place()));
                    continue;
                }
            },
            Err(Refused::UnknownMark) => {
                faults.push(screen::unknown_mark(trimmed, marks).at(span.place()));
                continue;
            }
            Err(Refused::NotANumber) => {
                let why = number::diagnose(trimmed, source.decimal_comma);
                faults.note(why.code, || {
                    Fault::wrong(why.code, why.what).at(span.place()).expected("a number").repair(why.repair)
                });
                continue;
            }
        };
        if let Some(value) = value {
            if scale == Scale::Log && value <= 0.0 {
                faults.note("not-above-zero", || screen::not_above_zero(trimmed).at(span.place()));
                continue;
            }
            codes.look_at(value, || span.place());
        }
        let uncertainty = uncertainties.and_then(|all| all.get(i)).map_or(0.0, |u| u / factor);
        if uncertainties.is_some() && (uncertainty <= 0.0 || !uncertainty.is_finite()) {
            faults.push(
                Fault::wrong("not-an-uncertainty", "an uncertainty that is not above 0").at(span.place()),
            );
            continue;
        }
        let row = Row {
            file: None,
            line: i as u64 + 1,
            text: trimmed.as_bytes(),
            id: None,
            replicate: None,
            observed: value.map(|value| Observed { value, mark, uncertainty }),
            day: None,
            decimals,
            fate: if value.is_some() { Fate::Used } else { Fate::Missing },
        };
        gather.take(cell, &row, false, faults, || span.place());
    }
    codes.judge(faults);
}

/// The same bytes read by two sources are the same readings, unless they take other columns or their
/// conditions keep them apart.
fn refuse_the_same_twice(plan: &Plan, gather: &Gather, faults: &mut FaultList) {
    let mut seen: Vec<(&Source, &FileRef, &str)> = Vec::new();
    for source in &plan.sources {
        let Whence::Files(files) = &source.from else {
            continue;
        };
        for file in files {
            let hash =
                gather.files.iter().find(|known| known.path == file.path).map(|known| known.sha256.as_str());
            let Some(hash) = hash.filter(|hash| !hash.is_empty()) else {
                continue;
            };
            let earlier = seen.iter().find(|(other, _, known)| {
                *known == hash && takes_the_same_column(source, other) && !never_both(source, other)
            });
            if let Some((_, first, _)) = earlier {
                let message = if first.written == file.written {
                    format!("{} is read twice: its readings would count double", file.written)
                } else {
                    format!(
                        "{} holds the same bytes as {}: its readings would count double",
                        file.written, first.written
                    )
                };
                let line = first.span.place().line;
                faults.push(
                    Fault::wrong("file-twice", message)
                        .at(file.span.place())
                        .expected(format!("each reading once (first named on line {line})"))
                        .repair(
                            "take one of the two out, or separate their rows by `where` on the same column",
                        ),
                );
            }
            seen.push((source, file, hash));
        }
    }
}

fn takes_the_same_column(a: &Source, b: &Source) -> bool {
    match (&a.what, &b.what) {
        (SourceKind::Readings { value: a, .. }, SourceKind::Readings { value: b, .. }) => a == b,
        (SourceKind::Summaries(a), SourceKind::Summaries(b)) => a == b,
        _ => false,
    }
}

fn refuse_readings_beside_summary(gather: &Gather, faults: &mut FaultList) {
    for cell in &gather.cells {
        if let Some(summary) = &cell.summary
            && cell.has_readings
        {
            faults.note("readings-and-summary", || {
                let message =
                    format!("{}, {} is given both by readings and by a summary", cell.series, cell.period);
                Fault::wrong("readings-and-summary", message)
                    .at(summary.place.clone())
                    .expected("one of the two")
                    .repair("take the summary out, or leave the period's readings out by `where`")
            });
        }
    }
}

fn judge_exclusions(plan: &Plan, gather: &Gather, heads: &[Option<Vec<String>>], faults: &mut FaultList) {
    for (exclude, found) in plan.excludes.iter().zip(&gather.found) {
        if !found.applies {
            let names: Vec<String> = heads.iter().flatten().flatten().cloned().collect();
            let unknown = exclude.rows_where.iter().map(|(name, _)| name).find(|name| !names.contains(name));
            let message = match unknown {
                Some(name) => format!("no file has a column `{name}` for this exclusion"),
                None => "no file has all columns of this exclusion".to_string(),
            };
            let mut distinct: Vec<String> = Vec::new();
            for name in &names {
                if !distinct.contains(name) {
                    distinct.push(name.clone());
                }
            }
            let fault = Fault::wrong("no-such-column", message)
                .at(exclude.span.place())
                .expected(format!("columns among {}", list(&distinct)));
            faults.push(match unknown.and_then(|name| nearest(name, &distinct)) {
                Some(near) => fault.repair(format!("did you mean `{near}`?")),
                None => fault,
            });
        } else if found.count != exclude.rows {
            let lines: Vec<String> =
                found.lines.iter().map(|(file, line)| gather.name_of_row(*file, *line)).collect();
            let where_found = match lines.as_slice() {
                [] => String::new(),
                some => format!(" ({}{})", some.join(", "), if found.count > 5 { ", ..." } else { "" }),
            };
            let rows = |count: u64| if count == 1 { "1 row".to_string() } else { format!("{count} rows") };
            let message = format!("this exclusion matches {}{where_found}", rows(found.count));
            let repair = match found.count {
                0 => "compare the texts of `where` with the file's, letter by letter".to_string(),
                count => format!("mend `where`, or say rows = {count} if all of them are meant"),
            };
            faults.push(
                Fault::wrong("exclusion-count", message)
                    .at(exclude.span.place())
                    .expected(rows(exclude.rows))
                    .repair(repair),
            );
        }
    }
}

fn assemble(mut gather: Gather, periods: Vec<Period>) -> Data {
    let scale = gather.scale;
    let rank: BTreeMap<&Period, usize> = periods.iter().enumerate().map(|(i, period)| (period, i)).collect();
    let mut series: Vec<SeriesData> = Vec::new();
    let mut cells = std::mem::take(&mut gather.cells);
    cells.sort_by(|a, b| {
        natural_order(&a.series, &b.series).then_with(|| rank.get(&a.period).cmp(&rank.get(&b.period)))
    });
    let any_uncertainty = cells.iter().any(|cell| cell.special.iter().any(|one| one.uncertainty > 0.0));
    for mut cell in cells {
        let is_new = series.last().is_none_or(|last| last.name != cell.series);
        if is_new {
            series.push(SeriesData { name: cell.series.clone(), periods: Vec::new() });
        }
        if let Some(last) = series.last_mut() {
            last.periods.push(finish::period_data(&mut cell, scale));
        }
    }
    let mut cautions = gather.cautions;
    if scale == Scale::Log && any_uncertainty {
        cautions.push(Caution::new(
            "uncertainty-on-log-scale",
            "Uncertainties of single readings were put onto the log scale to first order, as u/x.",
        ));
    }
    if gather.ids_beyond {
        cautions.push(Caution::new(
            "ids-not-compared",
            format!(
                "Only the first {IDS_COMPARED_AT_MOST} row ids were compared with each other: a reading that stands twice further on was not looked for."
            ),
        ));
    }
    let (excluded, used) = (gather.counts.excluded, gather.counts.used);
    if excluded * 10 > used + excluded {
        cautions.push(Caution::new(
            "many-excluded",
            format!("{excluded} of {} readings were excluded, more than one in ten.", used + excluded),
        ));
    }
    Data {
        series,
        periods,
        files: gather.files,
        excluded_rows: gather.found.into_iter().map(|found| found.rows).collect(),
        rows_kept: gather.rows_kept,
        counts: gather.counts,
        cautions,
    }
}
