//! Screened records, gathered into units of effort.

use crate::units::Metres;

use super::ledger::Ledger;
use super::settings::Count;

/// One unit of effort: a visit, its records, or a place.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Unit {
    /// Compact index of its cell.
    pub cell: u32,
    /// What it weighs.
    pub weight: f64,
    /// Which outing (observer and date) it belongs to; for places, the place itself.
    pub outing: u32,
    /// Smallest stated radius of uncertainty among its records, metres; not a number where unknown.
    pub uncertainty: f32,
    /// Where in its cell it lies, from the centre, in columns and rows (−½ to ½): the mean of its
    /// records; 0 for a place.
    pub offset: [f32; 2],
}

/// Median of the stated uncertainties; `None` where none is stated.
pub fn median_uncertainty(units: &[Unit]) -> Option<Metres> {
    let mut stated: Vec<f64> =
        units.iter().map(|u| f64::from(u.uncertainty)).filter(|v| !v.is_nan()).collect();
    stated.sort_unstable_by(f64::total_cmp);
    if stated.is_empty() { None } else { Metres::new(crate::maths::rank::quantile(&stated, 0.5)) }
}

/// What the visits look like.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct VisitFacts {
    /// Number of distinct visits.
    pub count: u64,
    /// Mean number of records per visit.
    pub mean: f64,
    /// Median number of records per visit.
    pub median: f64,
    /// Share of visits with a single record.
    pub single_share: f64,
}

/// The records of a study, ready to be split.
#[derive(Debug, Clone)]
pub struct Records {
    /// What became of every row.
    pub ledger: Ledger,
    /// What is counted.
    pub count: Count,
    /// The units, in an order that does not depend on the order of files or rows.
    pub units: Vec<Unit>,
    /// Whether units of one outing can be told (there is a date or an observer).
    pub outings: bool,
    /// Number of cells with at least one record.
    pub places: usize,
    /// The visits.
    pub visits: VisitFacts,
    /// Inverse Simpson number of observers, by units; `None` without the column.
    pub effective_observers: Option<f64>,
    /// Inverse Simpson number of data sets, by units; `None` without the column.
    pub effective_datasets: Option<f64>,
    /// Largest share of units of one observer, one data set, one cell.
    pub top_share: [Option<f64>; 3],
    /// Rows with a date to the day, as a range, month, year, and without a readable one.
    pub dates: [u64; 5],
}

impl Records {
    /// Total weight of the units.
    pub fn weight(&self) -> f64 {
        crate::maths::sum::sum(self.units.iter().map(|u| u.weight))
    }
}
