//! The model of one series in symbols and words, and what is known of its quantities on three bases.

use super::numbers::{NOTHING, Numbers};
use super::table::{Column, TableView, plain};
use crate::data::evidence::{Evidence, Seen, Single};
use crate::findings::SeriesFindings;
use crate::posterior::{Law, Posterior, When};
use crate::prior::{Between, LevelPrior, Model, Pattern, Periods, Within};
use crate::quantity::{Absent, Scale};
use crate::questions::terms;
use crate::report::text;

/// The equations of a model, one a line.
pub fn equations(model: &Model, readings: &Evidence) -> Vec<String> {
    let singles = match readings {
        Evidence::Singles(singles) => singles.as_slice(),
        _ => &[],
    };
    let any = |is: &dyn Fn(&Single) -> bool| singles.iter().any(is);
    let own = any(&|single| single.uncertainty > 0.0);
    let x = match model.scale {
        Scale::Linear => "x_i",
        Scale::Log => "ln x_i",
    };
    let spread = match model.within {
        Within::None => "u_i²",
        _ if own => "σ² + u_i²",
        _ => "σ²",
    };
    let mut lines = vec![format!("{x} | θ, σ ~ N(θ, {spread})    readings of the period under review")];
    if model.bias_sd > 0.0 {
        lines = vec![
            format!("{x} | θ, b, σ ~ N(θ + b, {spread})    readings of the period under review"),
            format!("b ~ N(0, {}²)    bias common to all readings", text::record(model.bias_sd)),
        ];
    }
    let sd = match spread {
        "u_i²" => "u_i",
        "σ²" => "σ",
        _ => "√(σ² + u_i²)",
    };
    let (less, plus) = if model.bias_sd > 0.0 { ("θ − b", "θ + b") } else { ("θ", "θ") };
    let c = if model.scale == Scale::Log { "ln c" } else { "c" };
    if any(&|single| matches!(single.seen, Seen::Below(_))) {
        lines.push(format!("a reading marked below c counts as P(x_i < c) = Φ(({c} − {less})/{sd})"));
    }
    if any(&|single| matches!(single.seen, Seen::Above(_))) {
        lines.push(format!("a reading marked above c counts as P(x_i > c) = Φ(({plus} − {c})/{sd})"));
    }
    if any(&|single| matches!(single.seen, Seen::Rounded { .. })) {
        let ends = if model.scale == Scale::Log { ["ln a", "ln b"] } else { ["a", "b"] };
        let [a, b] = ends.map(|end| format!("Φ(({end} − {less})/{sd})"));
        lines.push(format!(
            "a rounded reading counts as P(a < x_i < b) = {b} − {a}, a and b half a step about it"
        ));
    }
    if own && model.within != Within::None {
        lines.push("u_i: each reading’s own standard uncertainty".to_string());
    }
    lines.extend(within(&model.within));
    lines.extend(level(&model.level, "θ"));
    lines
}

fn within(within: &Within) -> Vec<String> {
    match within {
        Within::Known(sd) => vec![format!("σ = {}, known", text::record(*sd))],
        Within::Worth { sd, df } => {
            vec![format!("σ² ~ scaled inverse χ²({}, {}²)", text::record(*df), text::record(*sd))]
        }
        Within::Pooled { .. } => {
            vec!["p(σ²) ∝ 1/σ², one σ for the readings of all periods used".to_string()]
        }
        Within::Readings => vec!["p(σ²) ∝ 1/σ², from the readings of this period alone".to_string()],
        Within::ReadingsBeside { history_sd } => vec![
            "p(σ²) ∝ 1/σ², from the readings of this period alone".to_string(),
            format!("σ of the earlier periods = {}, known", text::record(*history_sd)),
        ],
        Within::None => vec!["u_i: each reading’s own standard uncertainty".to_string()],
    }
}

fn level(level: &LevelPrior, theta: &str) -> Vec<String> {
    let number = text::record;
    match level {
        LevelPrior::Flat => vec![format!("p({theta}) ∝ 1    flat: the readings speak alone")],
        LevelPrior::Stated { mean, sd } => {
            vec![format!("{theta} ~ N({}, {}²)    stated", number(*mean), number(*sd))]
        }
        LevelPrior::Worth { mean, readings } => {
            vec![format!(
                "{theta} ~ N({}, σ²/{})    stated, worth readings",
                number(*mean),
                number(*readings)
            )]
        }
        LevelPrior::LongRun { mean, sd, between_sd } => vec![
            format!("{theta} | μ ~ N(μ, τ²), τ = {}, known", number(*between_sd)),
            format!("μ ~ N({}, {}²)    stated", number(*mean), number(*sd)),
        ],
        LevelPrior::Periods(periods) => of_periods(periods, theta, "earlier period"),
        LevelPrior::Peers(periods) => of_periods(periods, theta, "other series"),
        LevelPrior::Mixture(parts) => parts
            .iter()
            .enumerate()
            .flat_map(|(place, (weight, part))| {
                let mut lines = level_of_part(part, theta);
                if let Some(first) = lines.first_mut() {
                    *first = format!("part {}, weight {}: {first}", place + 1, number(*weight));
                }
                lines
            })
            .collect(),
    }
}

fn level_of_part(part: &LevelPrior, theta: &str) -> Vec<String> {
    level(part, theta)
}

fn of_periods(periods: &Periods, theta: &str, each: &str) -> Vec<String> {
    let mut lines = Vec::new();
    match &periods.pattern {
        Pattern::AboutAMean if periods.between == Between::None => {
            lines.push(format!("{theta} = θ_j = μ    one level for every {each}"));
            lines.push("p(μ) ∝ 1".to_string());
        }
        Pattern::AboutAMean => {
            lines.push(format!("{theta}, θ_j | μ, τ ~ N(μ, τ²)    j: each {each}"));
            lines.push("p(μ) ∝ 1".to_string());
        }
        Pattern::RandomWalk { .. } => {
            lines.push(format!("θ_j | θ_(j−1), τ ~ N(θ_(j−1), g_j τ²)    j: each {each}, {theta} the last"));
            lines.push("g_j: periods elapsed; p(θ_1) ∝ 1".to_string());
        }
    }
    let number = text::record;
    match periods.between {
        Between::Uniform => lines.push("p(τ) ∝ 1 for τ > 0".to_string()),
        Between::HalfNormal(scale) => lines.push(format!("τ ~ half-normal, scale {}", number(scale))),
        Between::HalfCauchy(scale) => lines.push(format!("τ ~ half-Cauchy, scale {}", number(scale))),
        Between::Known(sd) => lines.push(format!("τ = {}, known", number(sd))),
        Between::None => {}
        Between::Reml => {
            lines.push("τ: estimated by restricted maximum likelihood, taken as known".to_string())
        }
        Between::Moments => lines.push("τ: estimated by moments, taken as known".to_string()),
    }
    if periods.weight < 1.0 {
        lines.push(format!("weight of the history: {}", number(periods.weight)));
    }
    lines
}

/// What each parameter is and how it is known.
pub fn parameters(series: &SeriesFindings, model: Option<&Model>) -> TableView {
    let mut table = TableView::new(
        "Parameters",
        &[("parameter", Column::Head), ("what it is", Column::Text), ("how it is known", Column::Text)],
    );
    let mut row = |symbol: &str, what: &str, how: String| {
        table.row(vec![plain(symbol), plain(what), plain(how)]);
    };
    row("θ", "level of the period under review: what is asked about", "from prior and readings".to_string());
    row("σ", "within sd: scatter of single readings", series.within_words.clone());
    let periods = model.and_then(|model| periods_of(&model.level));
    if let Some((periods, peers)) = periods {
        let each = if peers { "other series" } else { "earlier periods" };
        row("μ", "long-run mean", format!("from {} {each}", periods.periods.len()));
        row("τ", "between sd", between_words(periods.between).to_string());
    } else if let Some(LevelPrior::LongRun { .. }) = model.map(|model| &model.level) {
        row("μ", "long-run mean", "stated".to_string());
        row("τ", "between sd", "stated, known".to_string());
    }
    if model.is_some_and(|model| model.bias_sd > 0.0) {
        row("b", "bias common to all readings", "stated standard uncertainty, mean 0".to_string());
    }
    table
}

fn periods_of(level: &LevelPrior) -> Option<(&Periods, bool)> {
    match level {
        LevelPrior::Periods(periods) => Some((periods, false)),
        LevelPrior::Peers(periods) => Some((periods, true)),
        LevelPrior::Mixture(parts) => parts.iter().find_map(|(_, part)| periods_of(part)),
        _ => None,
    }
}

fn between_words(between: Between) -> &'static str {
    match between {
        Between::Uniform => "unknown, uniform prior, integrated out",
        Between::HalfNormal(_) => "unknown, half-normal prior, integrated out",
        Between::HalfCauchy(_) => "unknown, half-Cauchy prior, integrated out",
        Between::Known(_) => "stated, known",
        Between::None => "none: all periods share one level",
        Between::Reml | Between::Moments => "estimated, then taken as known (plug-in)",
    }
}

/// The sd taken as known, in the quantity's unit; nothing where it is not known or on the log scale.
pub fn known_sd(model: &Model) -> Option<f64> {
    match (&model.within, model.scale) {
        (Within::Known(sd), Scale::Linear) => Some(*sd),
        _ => None,
    }
}

/// Quantities down, bases across; and why what is missing does not exist.
pub fn results(series: &SeriesFindings, numbers: &Numbers<'_>) -> (TableView, Vec<String>) {
    let plan = numbers.plan;
    let unit = super::data::in_brackets(&numbers.unit);
    let caption = match numbers.scale {
        Scale::Linear => format!("What is known{unit}: mean, sd and central 95 % interval"),
        Scale::Log => format!(
            "What is known{unit}: median (geometric mean) and central 95 % interval; spreads as factors"
        ),
    };
    let mut table = TableView::new(
        caption,
        &[
            ("quantity", Column::Head),
            ("prior only", Column::Text),
            ("readings only", Column::Text),
            ("both", Column::Text),
        ],
    );
    type Of = fn(&Posterior) -> Result<Law, Absent>;
    let rows: [(String, Of, bool); 6] = [
        (format!("level of {}", plan.review.period), |p| p.level(When::This), false),
        ("long-run mean".to_string(), |p| p.level(When::LongRun), false),
        (format!("level of {}", terms::period_words(plan, When::Next)), |p| p.level(When::Next), false),
        ("within sd".to_string(), Posterior::within_sd, true),
        ("between sd".to_string(), Posterior::between_sd, true),
        ("next reading".to_string(), next_reading, false),
    ];
    // What is missing, by reason and bases, so that each reason is read once.
    let mut missing: Vec<(String, Vec<&str>, Vec<String>)> = Vec::new();
    for (name, of, of_spread) in rows {
        let mut cells = vec![plain(&name)];
        let mut why: Vec<(String, Vec<&str>)> = Vec::new();
        for (basis, posterior) in [
            ("prior only", &series.prior),
            ("readings only", &series.readings_only),
            ("both", &series.posterior),
        ] {
            let law = posterior.as_ref().map_err(Absent::clone).and_then(of);
            match law.and_then(|law| numbers.law(&law, of_spread)) {
                Ok(said) => cells.push(plain(said)),
                Err(absent) => {
                    cells.push(plain(NOTHING));
                    match why.iter_mut().find(|(reason, _)| *reason == absent.reason) {
                        Some((_, bases)) => bases.push(basis),
                        None => why.push((absent.reason, vec![basis])),
                    }
                }
            }
        }
        if why.iter().map(|(_, bases)| bases.len()).sum::<usize>() < 3 {
            table.row(cells);
        }
        for (reason, bases) in why {
            match missing.iter_mut().find(|(known, of, _)| *known == reason && *of == bases) {
                Some((.., names)) => names.push(name.clone()),
                None => missing.push((reason, bases, vec![name.clone()])),
            }
        }
    }
    let missing = missing.into_iter().map(|(reason, bases, names)| {
        let names = names.join(", ");
        match bases.len() {
            3 => format!("{names}: {reason}"),
            _ => format!("{names} ({}): {reason}", bases.join(" and ")),
        }
    });
    (table, missing.collect())
}

fn next_reading(posterior: &Posterior) -> Result<Law, Absent> {
    match posterior.model.within {
        Within::None => Err(Absent::because("every reading brings its own uncertainty")),
        _ => posterior.reading(When::This, 1, None),
    }
}
