//! Numbers inside the sentences of a check. Full precision is in the figures beside them.

/// Four significant digits, without trailing zeros; an exponent outside 1e-4 to 1e7.
pub fn number(value: f64) -> String {
    if value == 0.0 {
        return "0".to_owned();
    }
    let scientific = format!("{value:.3e}");
    let exponent = scientific.split_once('e').and_then(|(_, digits)| digits.parse::<i32>().ok());
    match exponent {
        Some(exponent) if (-4..7).contains(&exponent) => {
            let decimals = usize::try_from(3 - exponent).unwrap_or(0);
            trimmed(format!("{value:.decimals$}"))
        }
        _ => scientific,
    }
}

/// A probability to three decimals, never 0 and never 1.
pub fn chance(p: f64) -> String {
    if p < 0.001 {
        "< 0.001".to_owned()
    } else if p > 0.999 {
        "> 0.999".to_owned()
    } else {
        format!("{p:.3}")
    }
}

/// "p = 0.042" or "p < 0.001".
pub fn p_is(p: f64) -> String {
    let shown = chance(p);
    if shown.starts_with(['<', '>']) { format!("p {shown}") } else { format!("p = {shown}") }
}

/// A count with its noun: "1 reading", "12 readings".
pub fn count(n: usize, singular: &str) -> String {
    if n == 1 { format!("1 {singular}") } else { format!("{n} {singular}s") }
}

fn trimmed(fixed: String) -> String {
    if fixed.contains('.') { fixed.trim_end_matches('0').trim_end_matches('.').to_owned() } else { fixed }
}
