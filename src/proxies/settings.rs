//! What a plan may say about the layers that explain effort.

/// How a layer is measured in a cell.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Measure {
    /// Distance from the cell's centre to the nearest feature, in metres.
    Distance,
    /// The value of a raster.
    Value,
}

impl Measure {
    /// The plan's word for it.
    pub fn word(self) -> &'static str {
        match self {
            Self::Distance => "distance",
            Self::Value => "value",
        }
    }
}

/// How a raster is brought to the grid.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Resample {
    /// Totals are kept.
    Sum,
    /// Average over the cell.
    Mean,
    /// Value at the centre.
    Nearest,
    /// Interpolated between the four nearest.
    Bilinear,
    /// Largest value in the cell.
    Max,
    /// Smallest value in the cell.
    Min,
}

/// One `[[layer]]` of a plan.
#[derive(Debug, Clone, PartialEq)]
pub struct LayerPlan {
    /// Its name.
    pub name: String,
    /// How it is measured.
    pub measure: Measure,
    /// Its file, as the plan writes it.
    pub file: String,
    /// Layer inside a container.
    pub table: Option<String>,
    /// Attribute filter.
    pub filter: Option<String>,
    /// How a raster is brought to the grid (default mean).
    pub resample: Resample,
    /// Value where the raster has none inside the region.
    pub missing: Option<f64>,
}
