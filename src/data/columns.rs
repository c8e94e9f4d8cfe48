//! Which column is which: the names of the spec found in a file's head, once, before the rows.

use super::dates::{self, Day};
use super::fault_list::FaultList;
use super::record::Record;
use crate::diagnostics::{Fault, Place};
use crate::plan::{DateOrder, PeriodOf, Plan, SeriesOf, Source};
use crate::quantity::Period;
use crate::spec::table::Span;

/// The head of a file.
pub struct Head {
    /// The file as the spec names it.
    pub file: String,
    pub names: Vec<String>,
    pub place: Place,
}

impl Head {
    /// The column of that name; a fault where there is none, or more than one.
    pub fn find(&self, name: &str, role: &str, span: &Span, faults: &mut FaultList) -> Option<usize> {
        let mut found = (0..self.names.len()).filter(|i| self.names[*i] == name);
        match (found.next(), found.next()) {
            (Some(only), None) => Some(only),
            (Some(_), Some(_)) => {
                faults.push(
                    Fault::wrong(
                        "duplicate-column",
                        format!("{} has more than one column named `{name}`", self.file),
                    )
                    .at(self.place.clone())
                    .expected("column names that differ")
                    .repair("rename one of them in the file"),
                );
                None
            }
            (None, _) => {
                let fault =
                    Fault::wrong("no-such-column", format!("{} has no column `{name}` ({role})", self.file))
                        .at(span.place())
                        .expected(format!("one of {}", list(&self.names)));
                faults.push(match nearest(name, &self.names) {
                    Some(near) => fault.repair(format!("did you mean `{near}`?")),
                    None => fault.repair("name a column of the file's head, letter by letter"),
                });
                None
            }
        }
    }
}

/// Names in backticks, cut where there are very many.
pub fn list(names: &[String]) -> String {
    const SHOWN: usize = 30;
    let shown: Vec<String> = names.iter().take(SHOWN).map(|name| format!("`{name}`")).collect();
    let more = names.len().saturating_sub(SHOWN);
    if more > 0 { format!("{} and {more} more", shown.join(", ")) } else { shown.join(", ") }
}

/// The name most like the wanted one, if any is like it at all.
pub fn nearest<'a>(wanted: &str, names: &'a [String]) -> Option<&'a str> {
    let plain = |text: &str| -> String {
        text.chars().filter(|c| c.is_alphanumeric()).flat_map(char::to_lowercase).collect()
    };
    let goal = plain(wanted);
    names
        .iter()
        .map(|name| (strsim::damerau_levenshtein(&goal, &plain(name)), name.as_str()))
        .filter(|(distance, _)| *distance <= 1.max(goal.chars().count() / 3))
        .min()
        .map(|(_, name)| name)
}

/// A cell's bytes without the space around.
#[inline]
pub fn trimmed(cell: &[u8]) -> &[u8] {
    // Most cells have nothing around them.
    let is_plain = |byte: &u8| byte.is_ascii_graphic();
    if cell.first().is_none_or(is_plain) && cell.last().is_none_or(is_plain) {
        return cell;
    }
    trim(cell)
}

#[cold]
fn trim(cell: &[u8]) -> &[u8] {
    let cell = cell.trim_ascii();
    let wide = cell.first().is_some_and(|b| *b >= 0x80) || cell.last().is_some_and(|b| *b >= 0x80);
    if wide {
        return std::str::from_utf8(cell).map_or(cell, |text| text.trim().as_bytes());
    }
    cell
}

/// Compares as periods and series are compared: trimmed, and a spreadsheet's 2025.0 is 2025.
#[inline]
pub fn same(cell: &[u8], wanted: &[u8]) -> bool {
    cell == wanted
        || cell
            .strip_suffix(b".0")
            .is_some_and(|whole| !whole.is_empty() && whole == wanted && whole.iter().all(u8::is_ascii_digit))
}

/// A condition on a row: one column, the texts that serve.
#[derive(Debug)]
pub struct Condition {
    pub column: usize,
    texts: Vec<Vec<u8>>,
    /// The texts as days, where the column holds dates.
    days: Vec<Day>,
    order: DateOrder,
}

impl Condition {
    fn new(column: usize, texts: &[String], source: &Source, holds_dates: bool) -> Condition {
        let day = |text: &String| {
            let text = text.trim().as_bytes();
            dates::parse(text, DateOrder::YearMonthDay).or_else(|| dates::parse(text, source.date_order))
        };
        Condition {
            column,
            texts: texts.iter().map(|text| Period::new(text).as_str().as_bytes().to_vec()).collect(),
            days: if holds_dates { texts.iter().filter_map(day).collect() } else { Vec::new() },
            order: source.date_order,
        }
    }

    #[inline]
    pub fn holds(&self, record: &Record<'_>) -> bool {
        let cell = trimmed(record.get(self.column));
        self.texts.iter().any(|text| same(cell, text))
            || (!self.days.is_empty()
                && dates::parse(cell, self.order).is_some_and(|day| self.days.contains(&day)))
    }
}

#[derive(Debug)]
pub enum PeriodColumn {
    Column(usize),
    Always(Period),
    YearOfDate { month: i8, day: i8 },
}

#[derive(Debug)]
pub enum SeriesColumn {
    Column(usize),
    Always(String),
}

/// What readings and summaries have in common.
#[derive(Debug)]
pub struct Columns {
    /// How many cells each row must have.
    pub count: usize,
    pub conditions: Vec<Condition>,
    pub series: SeriesColumn,
    pub period: PeriodColumn,
    pub date: Option<usize>,
    pub id: Option<usize>,
    /// Number of the exclusion in the plan, and its conditions; only those whose columns are here.
    pub exclusions: Vec<(usize, Vec<Condition>)>,
    pub missing: Vec<Vec<u8>>,
}

impl Columns {
    pub fn find(head: &Head, source: &Source, plan: &Plan, faults: &mut FaultList) -> Option<Columns> {
        let span = &source.span;
        let mut complete = true;
        let mut find = |name: &str, role: &str, faults: &mut FaultList| {
            let found = head.find(name, role, span, faults);
            complete &= found.is_some();
            found.unwrap_or(0)
        };
        let date = source.date.as_ref().map(|name| find(name, "date", faults));
        let is_date = |column| date == Some(column);
        let mut conditions = Vec::new();
        for (name, texts) in &source.rows_where {
            let column = find(name, "where", faults);
            conditions.push(Condition::new(column, texts, source, is_date(column)));
        }
        let series = match &source.series {
            SeriesOf::Column(name) => SeriesColumn::Column(find(name, "series", faults)),
            SeriesOf::Always(name) => SeriesColumn::Always(name.clone()),
        };
        let period = match &source.period {
            PeriodOf::Column(name) => PeriodColumn::Column(find(name, "period", faults)),
            PeriodOf::Always(period) => PeriodColumn::Always(period.clone()),
            PeriodOf::YearOfDate { month, day } => PeriodColumn::YearOfDate { month: *month, day: *day },
        };
        let id = source.id.as_ref().map(|name| find(name, "id", faults));
        let mut exclusions = Vec::new();
        for (number, exclude) in plan.excludes.iter().enumerate() {
            let column = |name: &str| head.names.iter().position(|known| known == name);
            let found: Option<Vec<Condition>> = exclude
                .rows_where
                .iter()
                .map(|(name, texts)| {
                    let column = column(name)?;
                    Some(Condition::new(column, texts, source, is_date(column)))
                })
                .collect();
            if let Some(conditions) = found {
                exclusions.push((number, conditions));
            }
        }
        let missing = source.missing.iter().map(|text| text.trim().as_bytes().to_vec()).collect();
        complete.then_some(Columns {
            count: head.names.len(),
            conditions,
            series,
            period,
            date,
            id,
            exclusions,
            missing,
        })
    }

    /// Whether the row is one of those taken.
    #[inline]
    pub fn takes(&self, record: &Record<'_>) -> bool {
        self.conditions.iter().all(|condition| condition.holds(record))
    }

    /// Whether a trimmed cell means that there is nothing.
    #[inline]
    pub fn is_missing(&self, cell: &[u8]) -> bool {
        cell.is_empty() || self.missing.iter().any(|text| text == cell)
    }
}

/// Two sources that read the same file can only take the same row twice if their conditions allow it:
/// they do not where both ask the same column for different texts.
pub fn never_both(a: &Source, b: &Source) -> bool {
    a.rows_where.iter().any(|(column, texts)| {
        b.rows_where.iter().any(|(other, others)| {
            column == other
                && !texts
                    .iter()
                    .any(|text| others.iter().any(|other| Period::new(other) == Period::new(text)))
        })
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_nearest_name_is_found_by_its_letters() {
        let names = ["Nitrate (mg/L)".to_string(), "year".to_string()];
        assert_eq!(nearest("nitrate_mg_l", &names), Some("Nitrate (mg/L)"));
        assert_eq!(nearest("yaer", &names), Some("year"));
        assert_eq!(nearest("borehole", &names), None);
    }

    #[test]
    fn cells_are_compared_trimmed_and_whole_numbers_as_such() {
        assert!(same(trimmed(b" 2025.0 "), b"2025"));
        assert!(same(trimmed("\u{a0}Weir\u{a0}".as_bytes()), b"Weir"));
        assert!(!same(b"2025.5", b"2025"));
        assert!(!same(b".0", b""));
    }
}
