//! # share beyond
//! "What share of readings lies above the limit?" Not the share counted among a few readings, but that
//! of all readings such a level and spread bring about: π = P(reading beyond | θ, σ). The answer is
//! its mean (the chance of the next reading) and a credible bound, the upper one by default; with
//! `more_than = 0.05` the chance that the share is more than one in twenty.
//!
//! Above L: π ≤ p where θ + z_{1−p} σ ≤ L, so P(π ≤ p) = Σ w Φ((L − z_{1−p} σ − m)/√v); below L:
//! Σ w Φ((m − L + z_p σ)/√v). The bounds solve these for p. Between or outside two limits the share
//! depends on how far θ lies from their middle, c: given σ it exceeds p where |θ − c| exceeds (inside:
//! stays under) the distance d(σ) at which the share is p, found by solving for it.
//!
//! The shortest interval is the shortest single one: [Q(r), Q(r + P)] with the tail r below it for which it is shortest.
//! A share piles up at 0 where readings beyond are rare and σ or the level is not well known: then it begins at 0 itself
//! (or ends at 1).
//!
//! Assumes normal readings (lognormal on the log scale) out to the limit; readings are meant as measured.
//!
//! Source: the share is a percentile read backwards; Hahn & Meeker, Statistical Intervals, 1991,
//! §4.5; Gelman et al., Bayesian Data Analysis, 3rd ed., §2.5.
//!
//! A worked number: prior N(40, 2²), σ = 1.5, six readings of mean 43.1, L = 45: m = 42.834286, √v =
//! 0.585540; the mean is 0.089318, and the upper 95 % bound solves 45 − z_{1−p} · 1.5 − 42.834286 =
//! 1.644854 · 0.585540, so z_{1−p} = 0.801724 and p = 0.21136.

use super::beyond::{self, ANY_SIDE, About, Asked};
use super::figures::{Figures, Meaning};
use super::terms::{self, Interval};
use super::{Linear, Question, QuestionKind, Subject, steps};
use crate::diagnostics::{Caution, Faults};
use crate::math::{fm, normal, roots};
use crate::plan::{Plan, QuestionPlan};
use crate::posterior::{Piece, Posterior, When};
use crate::quantity::{Absent, Beyond, Figure};
use crate::spec::keys::{Key, Takes};
use crate::spec::language;
use crate::spec::reader::Reader;
use crate::working::Step;
use std::cell::RefCell;

const KEYS: &[Key] = &[
    beyond::ABOVE,
    beyond::BELOW,
    beyond::BETWEEN,
    beyond::OUTSIDE,
    terms::PROBABILITY,
    Key::optional("interval", Takes::OneOf(terms::INTERVALS), "default upper bound"),
    Key::optional("more_than", Takes::Probability, "gives the chance that the share is more than this"),
];

pub const KIND: QuestionKind =
    QuestionKind { ask: "share beyond", page: include_str!("share_beyond.rs"), keys: KEYS, read };

#[derive(Debug)]
struct ShareBeyond {
    beyond: Asked,
    probability: f64,
    interval: Interval,
    more_than: Option<f64>,
}

fn read(asked: &QuestionPlan, plan: &Plan, faults: &mut Faults) -> Option<Box<dyn Question>> {
    let mut reader = Reader::new(&asked.table, KEYS, faults);
    let beyond = beyond::read(&mut reader, plan, ANY_SIDE, true);
    let probability = terms::read_probability(&mut reader);
    let interval = Interval::read(&mut reader, Interval::UpperBound);
    let more_than = reader.probability("more_than").map(|share| share.get());
    reader.finish_beside(&[language::QUESTION]);
    Some(Box::new(ShareBeyond { beyond: beyond?, probability, interval, more_than }))
}

/// What the shortest interval leaves below it.
enum Tail {
    AtZero,
    AtOne,
    Inside(f64),
}

/// A share, by the normal quantile that stands for it: p = Φ(−z), 1 − p = Φ(z). Both are then exact.
#[derive(Debug, Clone, Copy)]
struct Share {
    z: f64,
}

impl Share {
    /// The share itself.
    fn value(self) -> f64 {
        normal::sf(self.z)
    }

    /// What is left.
    fn rest(self) -> f64 {
        normal::cdf(self.z)
    }
}

/// P(share > p) and P(share ≤ p), each from its own tail.
fn split(posterior: &Posterior, beyond: Beyond, share: Share) -> Result<(f64, f64), Absent> {
    let z = share.z;
    match beyond {
        Beyond::Above(limit) => {
            let law = posterior.affine(When::This, 1.0, &|sigma| (z * sigma, 0.0))?;
            Ok((law.sf(limit), law.cdf(limit)))
        }
        Beyond::Below(limit) => {
            let law = posterior.affine(When::This, 1.0, &|sigma| (-z * sigma, 0.0))?;
            Ok((law.cdf(limit), law.sf(limit)))
        }
        Beyond::Outside(lower, upper) => {
            let (far, near) = apart(posterior, lower, upper, share.value(), share.rest())?;
            Ok((far, near))
        }
        Beyond::Between(lower, upper) => {
            // The share inside exceeds p where the share outside stays under 1 − p.
            let (far, near) = apart(posterior, lower, upper, share.rest(), share.value())?;
            Ok((near, far))
        }
    }
}

/// Shares below 1e−299, or as near to 1, are not told apart.
const REACH: f64 = 37.0;

/// The limit, and +1 for a share above it, −1 for one below.
fn one_sided(beyond: Beyond) -> Option<(f64, f64)> {
    match beyond {
        Beyond::Above(limit) => Some((limit, 1.0)),
        Beyond::Below(limit) => Some((limit, -1.0)),
        Beyond::Between(..) | Beyond::Outside(..) => None,
    }
}

/// The same where the level is held as a density: by the law of θ ± z σ itself.
fn bound_by_laws(posterior: &Posterior, (limit, sign): (f64, f64), tail: f64, upper: bool) -> Figure {
    let failed = RefCell::new(None);
    let excess = |z: f64| -> f64 {
        match posterior.affine(When::This, 1.0, &|sigma| (sign * z * sigma, 0.0)) {
            Ok(law) => {
                let (above, below) = (law.sf(limit), law.cdf(limit));
                let (more, less) = if sign > 0.0 { (above, below) } else { (below, above) };
                if upper { more - tail } else { tail - less }
            }
            Err(absent) => {
                failed.borrow_mut().get_or_insert(absent);
                f64::NAN
            }
        }
    };
    // With marked readings shares below 1e-18, or as near to 1, are not told apart.
    let reach = if posterior.is_marked() { 9.0 } else { REACH };
    let (first, last) = (excess(-reach), excess(reach));
    let found = match (first > 0.0, last < 0.0) {
        (true, _) => Ok(-reach),
        (_, true) => Ok(reach),
        _ => roots::solve(&excess, -reach, reach, roots::Tolerance::new(1e-13, 1e-13)),
    };
    if let Some(absent) = failed.into_inner() {
        return Err(absent);
    }
    let z = found.map_err(|error| Absent::failed(error.to_string()))?;
    Ok(Share { z }.value())
}

/// The bound from pieces alone: first on those at hand, then on pieces fine enough for that share.
fn one_sided_bound(posterior: &Posterior, (limit, sign): (f64, f64), tail: f64, upper: bool) -> Figure {
    if posterior.is_marked() || posterior.has_own_sd() {
        return bound_by_laws(posterior, (limit, sign), tail, upper);
    }
    let limit = limit - posterior.origin();
    let root_on = |pieces: &[Piece]| -> Figure {
        let excess = |z: f64| {
            let chance = |more: bool| -> f64 {
                pieces
                    .iter()
                    .map(|piece| {
                        let d = sign * (piece.level_apart - limit) + z * piece.reading_sd;
                        let t = d / piece.level_var.sqrt();
                        piece.weight * if more { normal::cdf(t) } else { normal::sf(t) }
                    })
                    .sum()
            };
            if upper { chance(true) - tail } else { tail - chance(false) }
        };
        if excess(REACH) < 0.0 {
            return Ok(REACH);
        }
        if excess(-REACH) > 0.0 {
            return Ok(-REACH);
        }
        roots::solve(&excess, -REACH, REACH, roots::Tolerance::tight(1.0))
            .map_err(|error| Absent::failed(error.to_string()))
    };
    let coarse = root_on(posterior.pieces()?)?;
    let z = posterior.on_pieces_for(sign * coarse, root_on)??;
    Ok(Share { z }.value())
}

/// The chances that the level lies further from the middle of two limits than where the share outside
/// them is `outside`, and nearer.
fn apart(
    posterior: &Posterior,
    lower: f64,
    upper: f64,
    outside: f64,
    inside: f64,
) -> Result<(f64, f64), Absent> {
    let middle = 0.5 * ((lower - posterior.origin()) + (upper - posterior.origin()));
    let half = 0.5 * (upper - lower);
    let tail = normal::upper_quantile(0.5 * outside).map_err(|error| Absent::failed(error.to_string()))?;
    // The σ with which the share outside is `outside` in the middle already: a kink of the distance.
    let kink = half / tail;
    let failed = RefCell::new(None);
    let split = |piece: &Piece| -> (f64, f64) {
        let d = match distance(half, piece.reading_sd, outside, inside) {
            Ok(distance) => distance,
            Err(error) => {
                failed.borrow_mut().get_or_insert(Absent::failed(error.to_string()));
                return (0.0, 0.0);
            }
        };
        if d == 0.0 {
            return (1.0, 0.0);
        }
        beyond::normal_split(
            Beyond::Outside(middle - d, middle + d),
            piece.level_apart,
            piece.level_var.sqrt(),
        )
    };
    let far = posterior.expect_with_kink(kink, &|piece| split(piece).0)?;
    let near = posterior.expect_with_kink(kink, &|piece| split(piece).1)?;
    match failed.into_inner() {
        Some(absent) => Err(absent),
        None => Ok((far, near)),
    }
}

/// The distance of θ from the middle at which the share outside ± half is `outside`; 0 where it is
/// more than that in the middle already.
fn distance(half: f64, sigma: f64, outside: f64, inside: f64) -> Result<f64, crate::math::error::MathError> {
    let h = half / sigma;
    let excess = |t: f64| {
        if outside <= 0.5 {
            normal::sf(h - t) + normal::sf(h + t) - outside
        } else {
            inside - fm::exp(normal::ln_interval(t - h, t + h))
        }
    };
    if excess(0.0) >= 0.0 {
        return Ok(0.0);
    }
    // One tail alone reaches the share at the first of these, and not before the whole does.
    let reach =
        h + if outside <= 0.5 { -normal::upper_quantile(outside)? } else { normal::upper_quantile(inside)? };
    let t = roots::solve(excess, 0.0, reach.max(1e-300) + 1e-9, roots::Tolerance::tight(1.0))?;
    Ok(t * sigma)
}

impl ShareBeyond {
    fn known<'a>(&self, subject: &Subject<'a>) -> Result<(&'a Posterior, Beyond), Absent> {
        let beyond = self.beyond.on_scale(subject.plan, subject.series)?;
        let posterior = subject.posterior.clone()?;
        terms::needs_within_sd(posterior)?;
        Ok((posterior, beyond))
    }

    fn mean(&self, subject: &Subject<'_>) -> Figure {
        let (posterior, beyond) = self.known(subject)?;
        Ok(beyond::chance(&posterior.reading(When::This, 1, None)?, beyond))
    }

    /// The share with P(share > p) = `above`, or with P(share ≤ p) = `below`: the smaller is given.
    fn bound(&self, subject: &Subject<'_>, tail: f64, upper: bool) -> Figure {
        let (posterior, beyond) = self.known(subject)?;
        if let Some(ends) = one_sided(beyond) {
            return one_sided_bound(posterior, ends, tail, upper);
        }
        let failed = RefCell::new(None);
        // Against z, which falls as the share rises: P(share > p) rises with z, P(share ≤ p) falls.
        let excess = |z: f64| match split(posterior, beyond, Share { z }) {
            Ok((more, less)) => {
                if upper {
                    more - tail
                } else {
                    tail - less
                }
            }
            Err(absent) => {
                failed.borrow_mut().get_or_insert(absent);
                f64::NAN
            }
        };
        let root = if excess(REACH) < 0.0 {
            Ok(REACH)
        } else if excess(-REACH) > 0.0 {
            Ok(-REACH)
        } else {
            roots::solve(&excess, -REACH, REACH, roots::Tolerance::tight(1.0))
        };
        match (root, failed.into_inner()) {
            (_, Some(absent)) => Err(absent),
            (Ok(z), None) => Ok(Share { z }.value()),
            (Err(error), None) => Err(Absent::failed(error.to_string())),
        }
    }

    /// The shortest single interval: over the tail `r` left below it, the length is looked at on a grid of ln r and
    /// ln (1 − P − r), then its derivative is solved for between the neighbours of the shortest.
    fn shortest(&self, subject: &Subject<'_>) -> (Figure, Figure) {
        let both = |absent: Absent| (Err(absent.clone()), Err(absent));
        match self.shortest_tail(subject) {
            Ok(Tail::Inside(r)) => {
                let left = 1.0 - self.probability - r;
                (self.bound(subject, r, false), self.bound(subject, left, true))
            }
            Ok(Tail::AtZero) => (
                self.support(subject).map(|(least, _)| least),
                self.bound(subject, 1.0 - self.probability, true),
            ),
            Ok(Tail::AtOne) => (
                self.bound(subject, 1.0 - self.probability, false),
                self.support(subject).map(|(_, most)| most),
            ),
            Err(absent) => both(absent),
        }
    }

    /// The least and the largest share there can be: with a known σ two limits leave some readings outside wherever the
    /// level lies.
    fn support(&self, subject: &Subject<'_>) -> Result<(f64, f64), Absent> {
        let (posterior, beyond) = self.known(subject)?;
        let (lower, upper, outside) = match beyond {
            Beyond::Above(_) | Beyond::Below(_) => return Ok((0.0, 1.0)),
            Beyond::Outside(lower, upper) => (lower, upper, true),
            Beyond::Between(lower, upper) => (lower, upper, false),
        };
        let pieces = posterior.pieces()?;
        let Some(sigma) = pieces.first().map(|piece| piece.reading_sd) else { return Ok((0.0, 1.0)) };
        if pieces.iter().any(|piece| piece.reading_sd != sigma) {
            return Ok((0.0, 1.0));
        }
        let h = 0.5 * (upper - lower) / sigma;
        Ok(if outside { (2.0 * normal::sf(h), 1.0) } else { (0.0, fm::exp(normal::ln_interval(-h, h))) })
    }

    fn shortest_tail(&self, subject: &Subject<'_>) -> Result<Tail, Absent> {
        let all = 1.0 - self.probability;
        // y = ln (r / (all − r)): both ends are far out.
        let tail =
            |y: f64| if y < 0.0 { all * fm::exp(y) / (1.0 + fm::exp(y)) } else { all / (1.0 + fm::exp(-y)) };
        let ends = |y: f64| -> Result<(f64, f64), Absent> {
            Ok((self.bound(subject, tail(y), false)?, self.bound(subject, tail(-y), true)?))
        };
        let length = |y: f64| ends(y).map(|(low, high)| high - low);
        const FARTHEST: f64 = 14.0;
        let places: Vec<f64> = (-7..=7).map(|k| 2.0 * f64::from(k)).collect();
        let mut best = (f64::INFINITY, 0);
        for (index, y) in places.iter().enumerate() {
            let here = length(*y)?;
            if here < best.0 {
                best = (here, index);
            }
        }
        let (least, most) = self.support(subject)?;
        let at_zero = self.bound(subject, all, true)? - least;
        let at_one = most - self.bound(subject, all, false)?;
        if at_zero <= best.0 || at_one <= best.0 {
            return Ok(if at_zero <= at_one { Tail::AtZero } else { Tail::AtOne });
        }
        // The derivative by y, by differences of seventh order.
        const STEP: f64 = 0.02;
        const WEIGHTS: [f64; 3] = [0.75, -0.15, 1.0 / 60.0];
        let failed = RefCell::new(None);
        let slope = |y: f64| -> f64 {
            let mut sum = 0.0;
            for (k, weight) in WEIGHTS.iter().enumerate() {
                let by = STEP * (k as f64 + 1.0);
                match (length(y + by), length(y - by)) {
                    (Ok(after), Ok(before)) => sum += weight * (after - before),
                    (Err(absent), _) | (_, Err(absent)) => {
                        failed.borrow_mut().get_or_insert(absent);
                        return f64::NAN;
                    }
                }
            }
            sum
        };
        let middle = places[best.1];
        let (from, to) = ((middle - 2.0).max(-FARTHEST - 1.0), (middle + 2.0).min(FARTHEST + 1.0));
        let (first, last) = (slope(from), slope(to));
        let root = if first < 0.0 && last > 0.0 {
            roots::solve(&slope, from, to, roots::Tolerance::new(0.0, 1e-9))
                .map_err(|error| Absent::failed(error.to_string()))
        } else {
            Err(Absent::failed("the shortest interval was not found"))
        };
        match failed.into_inner() {
            Some(absent) => Err(absent),
            None => root.map(|y| Tail::Inside(tail(y))),
        }
    }

    fn more_than(&self, subject: &Subject<'_>, share: f64) -> Figure {
        let (posterior, beyond) = self.known(subject)?;
        let z = normal::upper_quantile(share).map_err(|error| Absent::failed(error.to_string()))?;
        Ok(split(posterior, beyond, Share { z })?.0)
    }
}

impl Question for ShareBeyond {
    fn answer(&self, subject: &Subject<'_>) -> Figures {
        let left_over = 1.0 - self.probability;
        let (lower, upper) = match self.interval {
            Interval::LowerBound => {
                (self.bound(subject, left_over, false), terms::no_other_end(self.interval))
            }
            Interval::UpperBound => {
                (terms::no_other_end(self.interval), self.bound(subject, left_over, true))
            }
            Interval::Shortest => self.shortest(subject),
            Interval::Central => {
                (self.bound(subject, 0.5 * left_over, false), self.bound(subject, 0.5 * left_over, true))
            }
        };
        let figures = Figures::default()
            .number("estimate", self.mean(subject), Meaning::Share)
            .number("lower", lower, Meaning::Share)
            .number("upper", upper, Meaning::Share);
        match self.more_than {
            Some(share) => figures.number("chance", self.more_than(subject, share), Meaning::Chance),
            None => figures,
        }
    }

    fn words(&self, subject: &Subject<'_>) -> String {
        let period = terms::period_words(subject.plan, When::This);
        let interval = self.interval.words(self.probability);
        let beyond = self.beyond.words(subject);
        let measured = terms::as_measured(subject);
        let share = format!("share of readings of {period} that lie {beyond}: mean and {interval}");
        match self.more_than {
            Some(more) => {
                format!(
                    "{share}, and the probability that it is more than {}{measured}",
                    terms::percent(more)
                )
            }
            None => format!("{share}{measured}"),
        }
    }

    fn symbols(&self, subject: &Subject<'_>) -> String {
        let share = format!("π = P({} | θ, σ)", self.beyond.symbols("x", subject));
        let known = subject.known();
        match self.more_than {
            Some(more) => format!("{share}; E(π | {known}), P(π > {more} | {known})"),
            None => format!("{share}; E(π | {known})"),
        }
    }

    fn working(&self, subject: &Subject<'_>) -> Vec<Step> {
        let mut steps = steps::level(subject, When::This);
        if let Ok(mean) = self.mean(subject) {
            let formula = "E π = Σ w P(N(m, v + σ²) beyond)";
            steps.push(Step::new("mean share: the chance of the next reading", formula, &[], mean));
        }
        let figures = self.answer(subject);
        steps.extend(steps::read_off(&figures, "p with P(π ≤ p) = tail", self.probability));
        if let (Some(share), Some(chance)) = (self.more_than, figures.value("chance")) {
            let put_in = [("p", share)];
            steps.push(Step::new("chance of a larger share", "P(π > p)", &put_in, chance));
        }
        steps
    }

    fn gives(&self) -> Vec<&'static str> {
        let mut names = self.interval.gives();
        if self.more_than.is_some() {
            names.push("chance");
        }
        names
    }

    fn settings(&self) -> Vec<(&'static str, String)> {
        let mut settings = vec![
            self.beyond.setting(),
            ("probability", format!("{}", self.probability)),
            ("interval", terms::quoted(self.interval.name())),
        ];
        settings.extend(self.more_than.map(|share| ("more_than", format!("{share}"))));
        settings
    }

    fn cautions(&self, plan: &Plan) -> Vec<Caution> {
        self.beyond.caution(About::Reading, plan).into_iter().collect()
    }

    fn linear(&self, subject: &Subject<'_>, reading_sd: f64) -> Option<Linear> {
        let z = normal::upper_quantile(self.more_than?).ok()?;
        let beyond = self.beyond.on_scale(subject.plan, subject.series).ok()?;
        let shift = match beyond {
            Beyond::Above(_) => z * reading_sd,
            Beyond::Below(_) => -z * reading_sd,
            Beyond::Between(..) | Beyond::Outside(..) => return None,
        };
        Some(Linear { when: When::This, true_level: false, beyond, shift, variance: 0.0 })
    }
}
