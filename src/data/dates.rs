//! Dates in cells, read strictly in the one order that the spec names.

use crate::plan::DateOrder;
use jiff::civil::Date;

/// A day of the calendar, ordered in time: the year, then month and day in four and five bits below it.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub struct Day(i32);

impl Day {
    pub fn new(year: i32, month: i32, day: i32) -> Option<Day> {
        const DAYS: [i32; 12] = [31, 29, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31];
        let days = *DAYS.get(usize::try_from(month - 1).ok()?)?;
        let leap = year % 4 == 0 && (year % 100 != 0 || year % 400 == 0);
        let exists = (1..=9999).contains(&year) && (1..=days).contains(&day);
        (exists && (month != 2 || day < 29 || leap)).then_some(Day(year << 9 | month << 5 | day))
    }

    pub fn of(date: Date) -> Day {
        Day(i32::from(date.year()) << 9 | i32::from(date.month()) << 5 | i32::from(date.day()))
    }

    pub fn date(self) -> Option<Date> {
        Date::new(self.year() as i16, self.month() as i8, (self.0 & 31) as i8).ok()
    }

    pub fn year(self) -> i32 {
        self.0 >> 9
    }

    /// 1 to 12.
    pub fn month(self) -> i32 {
        self.0 >> 5 & 15
    }

    /// The year that the day falls in, named after the year it starts in, where years start on that
    /// month and day.
    pub fn year_that_starts(self, month: i8, day: i8) -> i32 {
        let start = i32::from(month) << 5 | i32::from(day);
        self.year() - i32::from(self.0 & 511 < start)
    }
}

/// How a year that starts on that month and day is named: "2024", or "2024/25" where it starts later
/// than on January 1st.
pub fn name_of_year(year: i32, month: i8, day: i8) -> String {
    if (month, day) == (1, 1) {
        year.to_string()
    } else {
        format!("{year}/{:02}", (year + 1).rem_euclid(100))
    }
}

/// How a cell must look, for messages.
pub fn form(order: DateOrder) -> &'static str {
    match order {
        DateOrder::YearMonthDay => "a date as 2025-03-31 (year, month, day)",
        DateOrder::DayMonthYear => "a date as 31.03.2025 (day, month, year)",
        DateOrder::MonthDayYear => "a date as 03/31/2025 (month, day, year)",
    }
}

/// A day of the calendar, or `None`: the year has four digits, in ISO order month and day have two;
/// nothing may follow.
#[inline]
pub fn parse(text: &[u8], order: DateOrder) -> Option<Day> {
    match order {
        DateOrder::YearMonthDay => match text {
            [y1, y2, y3, y4, b'-', m1, m2, b'-', d1, d2] => {
                let digits =
                    [*y1, *y2, *y3, *y4, *m1, *m2, *d1, *d2].map(|b| i32::from(b.wrapping_sub(b'0')));
                let [a, b, c, d, e, f, g, h] = digits;
                if digits.iter().any(|digit| *digit > 9) {
                    return None;
                }
                Day::new(a * 1000 + b * 100 + c * 10 + d, e * 10 + f, g * 10 + h)
            }
            _ => None,
        },
        DateOrder::DayMonthYear => {
            let (day, month, year) = three(text, b'.')?;
            Day::new(year, month, day)
        }
        DateOrder::MonthDayYear => {
            let (month, day, year) = three(text, b'/')?;
            Day::new(year, month, day)
        }
    }
}

/// Two parts of one or two digits and a year of four.
fn three(text: &[u8], separator: u8) -> Option<(i32, i32, i32)> {
    let mut parts = text.split(|b| *b == separator);
    let (a, b, year) = (parts.next()?, parts.next()?, parts.next()?);
    if parts.next().is_some() || year.len() != 4 || a.len() > 2 || b.len() > 2 {
        return None;
    }
    Some((number(a)?, number(b)?, number(year)?))
}

fn number(digits: &[u8]) -> Option<i32> {
    if digits.is_empty() || !digits.iter().all(u8::is_ascii_digit) {
        return None;
    }
    Some(digits.iter().fold(0, |sum, digit| sum * 10 + i32::from(digit - b'0')))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn read(text: &str, order: DateOrder) -> Option<String> {
        parse(text.as_bytes(), order).and_then(Day::date).map(|date| date.to_string())
    }

    #[test]
    fn dates_are_read_in_the_stated_order_only() {
        use DateOrder::*;
        assert_eq!(read("2024-02-29", YearMonthDay).as_deref(), Some("2024-02-29"));
        assert_eq!(read("1.3.2025", DayMonthYear).as_deref(), Some("2025-03-01"));
        assert_eq!(read("3/1/2025", MonthDayYear).as_deref(), Some("2025-03-01"));
        for wrong in
            ["2025-02-29", "2025-1-31", "20250131", "2025-01-31T10:00", "01.02.2025", "", "2025-13-01"]
        {
            assert_eq!(read(wrong, YearMonthDay), None, "{wrong}");
        }
        for wrong in ["1.3.25", "31.02.2025", "1/3/2025", "1.3.2025.", "001.3.2025", "1..2025"] {
            assert_eq!(read(wrong, DayMonthYear), None, "{wrong}");
        }
        assert_eq!(read("13/1/2025", MonthDayYear), None);
    }

    #[test]
    fn a_year_may_start_later() {
        let year =
            |text: &str| parse(text.as_bytes(), DateOrder::YearMonthDay).unwrap().year_that_starts(10, 1);
        assert_eq!((year("2024-09-30"), year("2024-10-01")), (2023, 2024));
        assert_eq!(name_of_year(1999, 10, 1), "1999/00");
        assert_eq!(name_of_year(2024, 1, 1), "2024");
    }

    proptest::proptest! {
        /// The calendar is jiff's.
        #[test]
        fn the_calendar_agrees(year in 1i16..=9999, month in 0i8..=13, day in 0i8..=32) {
            let ours = Day::new(year.into(), month.into(), day.into());
            let theirs = Date::new(year, month, day).ok();
            proptest::prop_assert_eq!(ours.and_then(Day::date), theirs);
            if let (Some(day), Some(date)) = (ours, theirs) {
                proptest::prop_assert_eq!(Day::of(date), day);
            }
        }
    }
}
