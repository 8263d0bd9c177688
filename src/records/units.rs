//! Screened records, gathered into units of effort.

use std::sync::Arc;

use jiff::civil::Date;

use crate::units::Metres;

use super::caps::{Capped, Groups};
use super::ledger::Ledger;
use super::piles::Pile;
use super::settings::Count;

/// One unit of effort: a visit, its records, or a place.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Unit {
    /// Its number among all units of the study.
    pub number: u32,
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

/// What the kept records reach over, and who they are from.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Reach {
    /// West, south, east, north of all places on the grid's CRS, those outside the region too.
    pub extent: Option<[f64; 4]>,
    /// First and last day.
    pub days: Option<(Date, Date)>,
    /// Distinct observers (lists as sets) and data sets, the unknown not counted.
    pub observers: usize,
    /// Distinct data sets.
    pub datasets: usize,
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
    /// The observer, the data set and the cell with the largest share of the units, and that share;
    /// observers and data sets by the rank of their names.
    pub top: [Option<(u32, f64)>; 3],
    /// Rows with a date to the day, as a range, month, year, and without a readable one.
    pub dates: [u64; 5],
    /// What they reach over.
    pub reach: Reach,
    /// Lattices on which kept coordinates lie, coarsest first, with the share of those that do.
    pub lattices: Vec<(&'static str, f64)>,
    /// The places that most records share to the last digit.
    pub piles: Vec<Pile>,
    /// What caps did.
    pub capped: Vec<Capped>,
    /// Whose each unit is, where a cap needs to know.
    pub groups: Option<Arc<Groups>>,
}

impl Records {
    /// Largest share of units of one observer, one data set, one cell.
    pub fn top_share(&self) -> [Option<f64>; 3] {
        self.top.map(|t| t.map(|(_, share)| share))
    }

    /// Total weight of the units.
    pub fn weight(&self) -> f64 {
        crate::maths::sum::sum(self.units.iter().map(|u| u.weight))
    }
}
