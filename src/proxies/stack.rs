//! All layers of a study on one grid.

use crate::grid::Field;

use super::settings::Measure;

/// A layer on the grid.
#[derive(Debug, Clone)]
pub struct Layer {
    /// Its name in the plan.
    pub name: String,
    /// How it is measured.
    pub measure: Measure,
    /// Unit of its values: `m`, or the raster's own (empty where it states none).
    pub unit: String,
    /// Its values over the region.
    pub field: Field,
}

/// The layers of a study, in the order of the plan.
#[derive(Debug, Clone, Default)]
pub struct ProxyStack(pub Vec<Layer>);

impl ProxyStack {
    /// The layer of a name; the plan guarantees that it exists.
    pub fn layer(&self, name: &str) -> &Layer {
        self.0.iter().find(|l| l.name == name).expect("the plan names only layers it holds")
    }
}
