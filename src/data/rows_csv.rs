//! readings.csv: every row as read, and what became of it.

use super::{Data, Fate, Mark, PeriodData};
use crate::plan::Plan;

/// The file's text (RFC 4180, lines end with LF). Where single rows were not kept it says so in its
/// only row.
pub fn rows_csv(data: &Data, plan: &Plan) -> String {
    let mut csv = String::from("series,period,row,text,value,mark,used,reason\n");
    if !data.rows_kept {
        let reason = format!(
            "{} rows were read; more than {} are not listed singly where inputs are hashed and no series is shown",
            data.counts.read,
            super::gather::ROWS_KEPT_AT_MOST
        );
        line(&mut csv, &["", "", "", "", "", "", "", &reason]);
        return csv;
    }
    for series in &data.series {
        for period in &series.periods {
            if period.facts.from_summary {
                summary_line(&mut csv, &series.name, period);
            }
            for row in &period.readings {
                let place = match row.file.and_then(|file| data.files.get(file)) {
                    Some(file) => format!("{}:{}", file.written, row.line),
                    None => format!("value {} in the spec", row.line),
                };
                let id = row.id.clone().unwrap_or(place);
                let value = row.value.map(|value| value.to_string()).unwrap_or_default();
                let mark = match row.mark {
                    Mark::None => "",
                    Mark::Below => "below",
                    Mark::Above => "above",
                };
                let (used, reason) = match row.fate {
                    Fate::Used => ("yes", String::new()),
                    Fate::Missing => ("no", "no reading".to_string()),
                    Fate::Excluded(number) => (
                        "no",
                        match plan.excludes.get(number) {
                            Some(exclude) => {
                                format!("excluded by {}, {}: {}", exclude.by, exclude.on, exclude.reason)
                            }
                            None => "excluded".to_string(),
                        },
                    ),
                    Fate::Later => ("no", "after the interim review's last day".to_string()),
                };
                line(
                    &mut csv,
                    &[&row.series, row.period.as_str(), &id, &row.text, &value, mark, used, &reason],
                );
            }
        }
    }
    csv
}

fn summary_line(csv: &mut String, series: &str, period: &PeriodData) {
    let facts = &period.facts;
    let value = facts.mean.map(|mean| mean.to_string()).unwrap_or_default();
    let mut reason = "summary".to_string();
    if facts.n > 0 {
        reason += &format!(", n = {}", facts.n);
    }
    if let Some(sd) = facts.sd {
        reason += &format!(", sd = {sd}");
    }
    line(csv, &[series, period.period.as_str(), "", "", &value, "", "yes", &reason]);
}

fn line(csv: &mut String, cells: &[&str]) {
    for (i, cell) in cells.iter().enumerate() {
        if i > 0 {
            csv.push(',');
        }
        if cell.contains(['"', ',', '\n', '\r']) {
            csv.push('"');
            csv.push_str(&cell.replace('"', "\"\""));
            csv.push('"');
        } else {
            csv.push_str(cell);
        }
    }
    csv.push('\n');
}
