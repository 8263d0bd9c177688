//! The delivered surface: floor, per cell or per area, scale.
//!
//! # Formula
//! d = (1 − floor)·density + floor, density over uniform; per cell w = d·area, per km² w = d; then
//! all w over their sum, their largest, or their mean over cells.

use crate::grid::Region;
use crate::maths::sum::par_sum;

use super::settings::{Per, Scale, SurfacePlan};

/// A surface as it is written.
#[derive(Debug, Clone)]
pub struct Finished {
    /// One value per inside cell.
    pub values: Vec<f64>,
    /// Sum of the values.
    pub sum: f64,
    /// Smallest value.
    pub min: f64,
    /// Largest value.
    pub max: f64,
    /// 1 ÷ Σ w² of the cells' chances.
    pub effective_cells: f64,
}

/// Finishes a density over uniform as the plan says.
pub fn finish(density: &[f64], region: &Region, plan: &SurfacePlan) -> Finished {
    let floor = plan.floor.get();
    let areas = region.areas();
    let n = density.len();
    let mixed: Vec<f64> = density.iter().map(|d| (1.0 - floor) * d + floor).collect();
    let mass = par_sum(n, |i| mixed[i] * areas[i]);
    let squares = par_sum(n, |i| (mixed[i] * areas[i] / mass) * (mixed[i] * areas[i] / mass));
    let raw: Vec<f64> = match plan.per {
        Per::Cell => mixed.iter().zip(areas).map(|(d, a)| d * a).collect(),
        Per::Km2 => mixed,
    };
    let divisor = match plan.scale {
        Scale::Sum => par_sum(n, |i| raw[i]),
        Scale::Max => raw.iter().copied().fold(0.0, f64::max),
        Scale::Mean => par_sum(n, |i| raw[i]) / n as f64,
    };
    let values: Vec<f64> = raw.into_iter().map(|v| v / divisor).collect();
    Finished {
        sum: par_sum(n, |i| values[i]),
        min: values.iter().copied().fold(f64::MAX, f64::min),
        max: values.iter().copied().fold(0.0, f64::max),
        effective_cells: 1.0 / squares,
        values,
    }
}
