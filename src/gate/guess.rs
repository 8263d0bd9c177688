//! Which column of a file of records may hold what, by its name.

use crate::diag::Outcome;
use crate::records::SourcePlan;

use super::archive;
use super::files::Files;
use super::parquet_in;
use super::points::Points;
use super::record_files::{Kind, kind, part_name, plain};
use super::text::{Form, Head, TextSource};

/// The columns of a file of records.
pub struct ColumnNames {
    /// Their names, in order.
    pub names: Vec<String>,
    /// Whether places are geometries.
    pub geometry: bool,
}

/// Usual names of columns, without case and signs, by the plan's key; Darwin Core terms are not among them.
const USUAL: [(&str, &[&str]); 7] = [
    ("longitude", &["longitude", "lon", "long", "lng", "decimallongitude", "x", "xcoord", "easting", "east"]),
    ("latitude", &["latitude", "lat", "decimallatitude", "y", "ycoord", "northing", "north"]),
    (
        "date",
        &["date", "eventdate", "observationdate", "obsdate", "dateobserved", "datecollected", "observedon"],
    ),
    (
        "observer",
        &["observer", "recorder", "collector", "recordedby", "observername", "observerid", "recordedbyid"],
    ),
    ("dataset", &["dataset", "datasetname", "datasetkey", "datasetid", "source", "project", "survey"]),
    ("taxon", &["taxon", "species", "scientificname", "taxonname", "speciesname"]),
    (
        "uncertainty",
        &[
            "uncertainty",
            "coordinateuncertainty",
            "uncertaintym",
            "accuracy",
            "positionalaccuracy",
            "uncertaintymetres",
        ],
    ),
];

/// The column that by its usual name may hold what a key of the plan asks for; `None` when there is none, or
/// more than one.
pub fn usual_column<'n>(names: &'n [String], key: &str) -> Option<&'n str> {
    let plain = |name: &str| -> String {
        name.chars().filter(char::is_ascii_alphanumeric).map(|c| c.to_ascii_lowercase()).collect()
    };
    let (_, usual) = USUAL.iter().find(|(k, _)| *k == key)?;
    let best = usual.iter().find(|u| names.iter().any(|n| plain(n) == **u))?;
    let mut fits = names.iter().filter(|n| plain(n) == **best);
    fits.next().filter(|_| fits.next().is_none()).map(String::as_str)
}

impl Files {
    /// The columns of a file of records.
    ///
    /// # Errors
    /// When the file cannot be opened.
    pub fn columns(&self, file: &str, source: &SourcePlan) -> Outcome<ColumnNames> {
        let path = self.path(file)?;
        let columns = |names| ColumnNames { names, geometry: false };
        let head = |name: &str, open: super::text::Open| -> Outcome<ColumnNames> {
            let text = TextSource { name, open, form: Form::Found(source.quotes) };
            Ok(columns(Head::open(&text)?.names))
        };
        match kind(&path, file, source.table.as_deref())? {
            Kind::Text => head(file, Box::new(|| plain(&path, file))),
            Kind::Zipped(zip, member) => {
                head(&zip.place(&member.name), Box::new(|| zip.stream(&member.name)))
            }
            Kind::Archive(_, archive) => {
                let archive::Archive { records, core } = *archive;
                let fields = records.columns.into_iter().chain(core.into_iter().flat_map(|c| c.columns));
                let mut names: Vec<String> = fields.map(|f| f.term).collect();
                names.sort();
                names.dedup();
                Ok(columns(names))
            }
            Kind::Parquet(parts) => {
                let name = part_name(file, &parts[0], parts.len());
                Ok(columns(parquet_in::Table::open(&parts[0], &name)?.names))
            }
            Kind::Vector => {
                let points = Points::open(self, file, source)?;
                Ok(ColumnNames { geometry: points.own.is_some(), names: points.names })
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::usual_column;

    #[test]
    fn usual_names_are_found_and_doubt_is_not_settled() {
        let names = |list: &[&str]| list.iter().map(|n| (*n).to_owned()).collect::<Vec<_>>();
        assert_eq!(usual_column(&names(&["id", "Lon", "lat"]), "longitude"), Some("Lon"));
        assert_eq!(usual_column(&names(&["obs_date"]), "date"), Some("obs_date"));
        assert_eq!(usual_column(&names(&["LON", "lon"]), "longitude"), None);
        assert_eq!(usual_column(&names(&["a"]), "observer"), None);
    }
}
