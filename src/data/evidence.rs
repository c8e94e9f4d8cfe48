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
