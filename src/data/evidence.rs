//! What the readings of one series and period say about its level: all that the likelihood needs.
//! Everything here is on the model's scale (natural logarithms where the quantity's scale is log).

/// The likelihood's view of one period of one series.
#[derive(Debug, Clone, PartialEq)]
pub enum Evidence {
    /// No usable reading.
    Nothing,
    /// Plain readings (or replicate averages, or a summary by n, mean and sd): their number, mean and
    /// sum of squared deviations from that mean. `ss` is `None` where a summary gave no sd. `rest` is what the
    /// exact mean has beyond `mean`: beside 200 kg a spread of 1 mg leaves few digits to a double.
    Sums { n: u64, mean: f64, ss: Option<f64>, rest: f64 },
    /// A mean with its whole standard uncertainty.
    Mean { mean: f64, uncertainty: f64 },
    /// Single readings: marked, rounded, or with uncertainties of their own.
    Singles(Vec<Single>),
}

/// One reading that does not go into sums.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Single {
    pub seen: Seen,
    /// The reading's own standard uncertainty; 0 where none was given.
    pub uncertainty: f64,
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Seen {
    At(f64),
    /// Somewhere below.
    Below(f64),
    /// Somewhere above.
    Above(f64),
    /// Printed as `at`, after rounding from somewhere in `lower..upper`.
    Rounded {
        lower: f64,
        at: f64,
        upper: f64,
    },
}

impl Evidence {
    /// Single readings, in an order in which that of the rows does not show, not even in a last digit.
    pub fn of_singles(mut singles: Vec<Single>) -> Evidence {
        if singles.is_empty() {
            return Evidence::Nothing;
        }
        let rank = |seen: &Seen| match seen {
            Seen::At(at) => (0, *at),
            Seen::Rounded { at, .. } => (1, *at),
            Seen::Below(at) => (2, *at),
            Seen::Above(at) => (3, *at),
        };
        singles.sort_by(|a, b| {
            let ((rank_a, at_a), (rank_b, at_b)) = (rank(&a.seen), rank(&b.seen));
            rank_a.cmp(&rank_b).then(at_a.total_cmp(&at_b)).then(a.uncertainty.total_cmp(&b.uncertainty))
        });
        Evidence::Singles(singles)
    }

    /// The number of readings, where they were counted.
    pub fn n(&self) -> Option<u64> {
        match self {
            Evidence::Nothing => Some(0),
            Evidence::Sums { n, .. } => Some(*n),
            Evidence::Mean { .. } => None,
            Evidence::Singles(singles) => Some(singles.len() as u64),
        }
    }

    pub fn is_nothing(&self) -> bool {
        matches!(self, Evidence::Nothing)
    }
}
