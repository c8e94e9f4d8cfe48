//! The figures of a summary, in a row of the spec or by columns of a file: which may stand together.

use crate::diagnostics::Fault;
use crate::plan::SummaryRow;
use crate::plan::make::Ground;
use crate::quantity::Scale;
use crate::spec::language;
use crate::spec::reader::Reader;
use crate::spec::table::Table;

const LINEAR: &[&str] = &["mean", "sd"];
const LOG: &[&str] = &["log_mean", "log_sd", "geometric_mean", "geometric_sd"];

pub fn row_of(table: &Table, scale: Scale, ground: &mut Ground) -> Option<SummaryRow> {
    let before = ground.faults.0.len();
    let mut reader = ground.reader(table, language::SUMMARY_ROW);
    let row = SummaryRow {
        series: reader.text("series").map(|name| name.trim().to_string()),
        period: reader.period("period"),
        n: reader.count("n"),
        mean: reader.number("mean"),
        sd: reader.not_negative("sd"),
        uncertainty: reader.positive("uncertainty"),
        log_mean: reader.number("log_mean"),
        log_sd: reader.not_negative("log_sd"),
        geometric_mean: reader.positive("geometric_mean"),
        geometric_sd: reader.at_least_one("geometric_sd"),
        span: table.span.clone(),
    };
    if check_scale(&mut reader, scale) {
        check_row(&mut reader, &row, scale);
    }
    reader.finish();
    (ground.faults.0.len() == before).then_some(row)
}

impl Reader<'_> {
    /// A geometric sd: 1 or above.
    fn at_least_one(&mut self, key: &str) -> Option<f64> {
        let number = self.positive(key)?;
        if number >= 1.0 { Some(number) } else { self.refuse(key) }
    }
}

/// Which columns of a file there must be.
pub fn check_columns(reader: &mut Reader<'_>, scale: Scale) {
    if !check_scale(reader, scale) {
        return;
    }
    let means: &[&str] = match scale {
        Scale::Linear => &["mean"],
        Scale::Log => &["log_mean", "geometric_mean"],
    };
    require_one(reader, means, "the mean");
    require_one(reader, &["n", "uncertainty"], "what the mean is worth");
}

/// Refuses figures of the other scale: an arithmetic mean of lognormal readings says nothing about
/// the mean of their logarithms.
fn check_scale(reader: &mut Reader<'_>, scale: Scale) -> bool {
    let (wrong, expected) = match scale {
        Scale::Linear => (LOG, "mean with sd"),
        Scale::Log => (LINEAR, "log_mean with log_sd, or geometric_mean with geometric_sd"),
    };
    let stray: Vec<&str> = wrong.iter().copied().filter(|key| reader.has(key)).collect();
    for key in &stray {
        let message = match scale {
            Scale::Linear => format!("`{key}` belongs to a quantity on the log scale"),
            Scale::Log => format!("on the log scale `{key}` does not say enough of the readings' logarithms"),
        };
        reader.fault_at(key, Fault::wrong("wrong-scale", message).expected(expected));
    }
    stray.is_empty()
}

fn require_one(reader: &mut Reader<'_>, keys: &[&str], what: &str) {
    let given: Vec<&str> = keys.iter().copied().filter(|key| reader.has(key)).collect();
    if given.is_empty() {
        let head = reader.table.span.place();
        let fault = Fault::wrong("missing-key", format!("{} does not say {what}", reader.table.name))
            .at(head)
            .expected(format!("`{}`", keys.join("` or `")));
        reader.faults.push(fault);
    }
}

fn check_row(reader: &mut Reader<'_>, row: &SummaryRow, scale: Scale) {
    let (means, spreads): (&[&str], &[&str]) = match scale {
        Scale::Linear => (&["mean"], &["sd"]),
        Scale::Log => (&["log_mean", "geometric_mean"], &["log_sd", "geometric_sd"]),
    };
    require_one(reader, means, "its mean");
    require_one(reader, &["n", "uncertainty"], "what its mean is worth");
    for pair in [means, spreads, &["n", "uncertainty"]] {
        if let [first, second] = pair
            && reader.has(first)
            && reader.has(second)
        {
            let fault = Fault::wrong("either-or", format!("`{first}` and `{second}` stand in one row"))
                .expected(match *second {
                    "uncertainty" => {
                        "n and sd, or the whole standard uncertainty of the mean instead".to_string()
                    }
                    _ => format!("`{first}` or `{second}`"),
                })
                .repair("leave one of the two out");
            reader.fault_at(second, fault);
        }
    }
    let spread = spreads.iter().any(|key| reader.has(key));
    if row.n.is_some_and(|n| n > 1) && !spread && !reader.has("uncertainty") {
        let fault = Fault::wrong("missing-key", "a mean of several readings needs their sd")
            .expected(format!("`{}` beside `n`", spreads.join("` or `")));
        reader.fault_at("n", fault);
    }
}
