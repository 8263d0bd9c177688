//! What a plan may say about the records.

use super::dates::DateRange;
use crate::units::{Length, Metres};

/// How the text between two separators is quoted.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Quotes {
    /// `"` encloses fields, `""` stands for one quote.
    Double,
    /// Quotes are characters like any other.
    None,
}

/// What counts as one unit of effort.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Count {
    /// Distinct (observer, date, cell).
    Visits,
    /// Every record.
    Records,
    /// Every cell with at least one record.
    Places,
}

impl Count {
    /// The plan's word for it.
    pub fn word(self) -> &'static str {
        match self {
            Self::Visits => "visits",
            Self::Records => "records",
            Self::Places => "places",
        }
    }
}

/// Names of the columns read.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Columns {
    /// Longitude, or easting when `crs` is projected.
    pub longitude: String,
    /// Latitude, or northing.
    pub latitude: String,
    /// Date of the observation.
    pub date: String,
    /// Who observed.
    pub observer: String,
    /// Which data set the record comes from.
    pub dataset: String,
    /// What was observed.
    pub taxon: String,
    /// Radius of uncertainty in metres.
    pub uncertainty: String,
    /// Which of the names above the plan states itself (a stated column must exist).
    pub stated: Vec<String>,
}

/// A column and the values looked for in it.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct ColumnValues {
    /// Name of the column.
    pub column: String,
    /// The values.
    pub values: Vec<String>,
}

/// Files of one layout.
#[derive(Debug, Clone, PartialEq)]
pub struct SourcePlan {
    /// The files, as the plan writes them (relative to its folder).
    pub files: Vec<String>,
    /// Layer or table inside a container.
    pub table: Option<String>,
    /// How fields are quoted; `None`: by kind of text.
    pub quotes: Option<Quotes>,
    /// The columns.
    pub columns: Columns,
    /// CRS of the columns.
    pub crs: String,
}

/// The most that one observer, and one data set, may weigh, as shares of the whole.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct CapPlan {
    /// The most one observer may weigh.
    pub observer: Option<f64>,
    /// The most one data set may weigh.
    pub dataset: Option<f64>,
}

/// `[records]` of a plan.
#[derive(Debug, Clone, PartialEq)]
pub struct RecordsPlan {
    /// Where the records are: the files of `[records]` itself first, then each `[[records.source]]`.
    pub sources: Vec<SourcePlan>,
    /// Keep only records whose whole span lies in this range.
    pub dates: Option<DateRange>,
    /// Drop what is vaguer.
    pub max_uncertainty: Option<Metres>,
    /// Keep only records with one of these values in each column.
    pub keep: Vec<ColumnValues>,
    /// Leave out records with one of these values in any column.
    pub leave_out: Vec<ColumnValues>,
    /// How far outside the region a record may lie to be moved inside.
    pub snap: Option<Length>,
    /// What is counted.
    pub count: Count,
    /// The most that one observer or data set may weigh.
    pub cap: CapPlan,
}

impl RecordsPlan {
    /// All files with the source they belong to; a file's number is its place in this list.
    pub fn files(&self) -> impl Iterator<Item = (&str, &SourcePlan)> {
        self.sources.iter().flat_map(|s| s.files.iter().map(move |f| (f.as_str(), s)))
    }

    /// The names of all files, one after another.
    pub fn file_names(&self) -> Vec<String> {
        self.files().map(|(f, _)| f.to_owned()).collect()
    }
}
