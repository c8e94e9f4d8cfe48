//! What could not be computed to the promised accuracy stops the review.

use crate::diagnostics::{Fault, Faults};
use crate::findings::SeriesFindings;
use crate::questions::figures::{Figures, Item};

/// A figure of the review's own answers that could not be computed to the promised accuracy is an error, never
/// a doubtful digit; under an alternative it is left out with its reason.
pub fn keep_exact(series: Vec<SeriesFindings>) -> (Vec<SeriesFindings>, Faults) {
    let mut faults = Faults::default();
    let mut note = |series: &str, what: &str, reason: &str| {
        faults.push(
            Fault::wrong(
                "not-exact",
                format!("{series}: {what} could not be computed to the promised accuracy: {reason}"),
            )
            .expected("data and priors of ordinary size")
            .repair("look at the within sd, the units and the values of this series"),
        );
    };
    for found in &series {
        for (what, posterior) in [
            ("the prior", &found.prior),
            ("the readings alone", &found.readings_only),
            ("the posterior", &found.posterior),
        ] {
            if let Err(absent) = posterior
                && absent.failed
            {
                note(&found.name, what, &absent.reason);
            }
        }
        for answer in &found.answers {
            for figures in [&answer.figures, &answer.prior_only, &answer.readings_only, &answer.rule_figures]
            {
                for reason in failures(figures) {
                    note(&found.name, &format!("the answer \"{}\"", answer.id), reason);
                }
            }
        }
    }
    (series, faults)
}

fn failures(figures: &Figures) -> impl Iterator<Item = &str> {
    figures.0.iter().filter_map(|(_, item)| match item {
        Item::Number(Err(absent), _) if absent.failed => Some(absent.reason.as_str()),
        _ => None,
    })
}
