//! The inputs of a study as files in a folder.

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};
use std::sync::{Arc, Mutex, Once};

use gdal::vector::LayerAccess;
use gdal::{Dataset, DatasetOptions, GdalOpenFlags};

use crate::diag::{Diagnostic, Observer, Outcome, Warnings};
use crate::grid::{Grid, Region};
use crate::proxies::{LayerPlan, Measure};
use crate::records::{Collector, Desk, RecordsPlan, Screener, Tray};

use super::digest::{InputFile, digest};
use super::record_files::{Kind, Reading};
use super::remote::remote_source;
use super::scale::Wander;
use super::sources::{GridRequest, LayerData, Peek, Sources};
use super::{crs, features, grid_in, record_files, scale, values};

/// Drivers that reach for a network.
const NETWORK_DRIVERS: &str = "HTTP WMS WMTS WCS OGCAPI EEDA EEDAI PLMOSAIC DAAS STACIT STACTA NGW PLSCENES \
                               WFS OAPIF CSW Elastic Carto AmigoCloud GMLAS MongoDBv3 PostgreSQL MySQL MSSQLSpatial \
                               ODBC PGeo HANA OCI";

/// As many unknown datums are told one by one.
const DATUMS_TOLD: usize = 10;

/// Makes GDAL silent and keeps it off the network; before its first use.
fn settle_gdal() {
    static ONCE: Once = Once::new();
    ONCE.call_once(|| {
        // settings of names known to exist cannot fail; errors come back as values, not on stderr
        drop(gdal::config::set_config_option("GDAL_SKIP", NETWORK_DRIVERS));
        drop(gdal::config::set_config_option("OGR_INTERLEAVED_READING", "YES"));
        drop(gdal::config::set_config_option("GDAL_PAM_ENABLED", "NO"));
        // whatever still names a web address, deep inside a file, is not asked for
        drop(gdal::config::set_config_option("CPL_VSIL_CURL_ALLOWED_EXTENSIONS", ".never"));
        gdal::config::set_error_handler(|_, _, _| {});
        // SAFETY: takes a number, touches no memory of ours
        unsafe { gdal_sys::OSRSetPROJEnableNetwork(0) };
    });
}

/// Versions of the libraries behind the gate.
pub fn libraries() -> String {
    format!("GDAL {}", gdal::version::VersionInfo::release_name())
}

/// Inputs in a folder, opened as the study asks for them.
pub struct Files {
    folder: PathBuf,
    opened: Mutex<Vec<String>>,
    unknown_datums: Mutex<BTreeMap<String, u64>>,
}

impl Files {
    /// Paths are relative to this folder.
    pub fn new(folder: &Path) -> Self {
        settle_gdal();
        Self { folder: folder.to_owned(), opened: Mutex::default(), unknown_datums: Mutex::default() }
    }

    /// The path of a file, noted as an input; it must exist and hold something.
    pub(super) fn path(&self, file: &str) -> Outcome<PathBuf> {
        let path = self.folder.join(file);
        let known = std::fs::metadata(&path).map_err(|e| {
            let text = match e.kind() {
                std::io::ErrorKind::NotFound => format!("no such file (looked for `{}`)", path.display()),
                _ => format!("cannot be opened: {e}"),
            };
            Diagnostic::input("no_such_file", file, text)
                .cure("paths in a plan are relative to the plan's own folder")
        })?;
        if known.is_file() && known.len() == 0 {
            return Err(Diagnostic::input("empty_file", file, "the file is empty")
                .cure("give the real one")
                .into());
        }
        let mut opened = self.opened.lock().expect("no thread panics while it notes a file");
        if !opened.iter().any(|o| o == file) {
            opened.push(file.to_owned());
        }
        drop(opened);
        no_network(&path, file)?;
        Ok(path)
    }

    /// Opens a raster.
    pub(super) fn raster(&self, file: &str) -> Outcome<Dataset> {
        self.open(file, GdalOpenFlags::GDAL_OF_RASTER, "not_a_raster", "no raster that can be read")
    }

    /// Opens a vector file.
    pub(super) fn vector(&self, file: &str) -> Outcome<Dataset> {
        self.open(file, GdalOpenFlags::GDAL_OF_VECTOR, "not_a_vector", "no vector file that can be read")
    }

    fn open(&self, file: &str, flags: GdalOpenFlags, rule: &'static str, what: &str) -> Outcome<Dataset> {
        let path = self.path(file)?;
        let options = DatasetOptions { open_flags: flags, ..DatasetOptions::default() };
        Dataset::open_ex(&path, options).map_err(|e| {
            let said = e.to_string();
            let why = if said.contains("returned a NULL pointer") && said.contains("''")
                || said.contains("not recognized")
            {
                "in no format known here".to_owned()
            } else {
                said
            };
            Diagnostic::input(rule, file, format!("is {what} ({why})"))
                .cure("check the path, and that the file is whole")
                .into()
        })
    }

    /// Hands the rows of every file of records to a desk; all problems of all files together.
    ///
    /// # Errors
    /// When a file cannot be read or lacks a column, or the desk or the tray fails.
    pub fn read_records<D: Desk>(
        &self,
        plan: &RecordsPlan,
        desk: &D,
        tray: &mut (dyn Tray<D::Part> + Send),
        observer: &dyn Observer,
    ) -> Outcome<()> {
        let mut problems = Vec::new();
        for (number, source) in plan.sources.iter().enumerate() {
            for file in &source.files {
                let mut to = Reading { plan, number, desk, tray: &mut *tray, observer };
                if let Err(p) = record_files::read(self, file, &mut to) {
                    problems.extend(p.0);
                }
            }
        }
        if problems.is_empty() { Ok(()) } else { Err(crate::diag::Problems(problems)) }
    }

    /// Every input opened so far, with its fingerprint; a shapefile's companions count as inputs.
    pub fn inputs(&self) -> Vec<InputFile> {
        let mut names: Vec<String> = Vec::new();
        let opened = self.opened.lock().expect("no thread panics while it notes a file");
        for file in opened.iter() {
            let path = Path::new(file);
            let whole = self.folder.join(file);
            if whole.is_dir() {
                names.extend(inside(&whole).iter().map(|n| path.join(n).display().to_string()));
                continue;
            }
            names.push(file.clone());
            if path.extension().is_some_and(|e| e.eq_ignore_ascii_case("shp")) {
                names.extend(
                    ["dbf", "shx", "prj", "cpg"].map(|e| path.with_extension(e).display().to_string()),
                );
            }
        }
        names.iter().filter_map(|n| digest(&self.folder.join(n), n)).collect()
    }
}

/// The files in a folder and in those below it, by name; links to folders are not followed.
fn inside(folder: &Path) -> Vec<String> {
    let mut names = Vec::new();
    for entry in std::fs::read_dir(folder).into_iter().flatten().flatten() {
        let name = entry.file_name().to_string_lossy().into_owned();
        if entry.file_type().is_ok_and(|t| t.is_dir()) {
            names.extend(inside(&entry.path()).iter().map(|n| format!("{name}/{n}")));
        } else if entry.path().is_file() {
            names.push(name);
        }
    }
    names.sort();
    names
}

/// A virtual raster or vector that refers to a network is refused.
fn no_network(path: &Path, file: &str) -> Outcome<()> {
    let virtual_file =
        path.extension().is_some_and(|e| ["vrt", "ovrt"].iter().any(|v| e.eq_ignore_ascii_case(v)));
    if !virtual_file {
        return Ok(());
    }
    let text = std::fs::read_to_string(path).unwrap_or_default();
    match remote_source(&text) {
        None => Ok(()),
        Some(found) => {
            Err(Diagnostic::input("remote_path", file, format!("refers to a network (`{found}`)"))
                .cure("download what it refers to; no command opens a network connection")
                .into())
        }
    }
}

impl Sources for Files {
    fn grid(&self, request: GridRequest) -> Outcome<Grid> {
        grid_in::grid(self, request)
    }

    fn region(&self, request: GridRequest, grid: Grid) -> Outcome<Region> {
        grid_in::region(self, request, grid)
    }

    fn wander(&self, region: &Region) -> Outcome<Option<Wander>> {
        scale::wander(region)
    }

    fn layer(&self, plan: &LayerPlan, region: &Arc<Region>, warnings: &mut Warnings) -> Outcome<LayerData> {
        match plan.measure {
            Measure::Distance => Ok(LayerData::Features(features::read(self, plan, region, warnings)?)),
            Measure::Value => {
                let (values, unit) = values::read(self, plan, region, warnings)?;
                Ok(LayerData::Values(values, unit))
            }
        }
    }

    fn records(
        &self,
        plan: &RecordsPlan,
        (screener, collector): (&Screener, &mut Collector),
        observer: &dyn Observer,
    ) -> Outcome<()> {
        self.read_records(plan, screener, collector, observer)
    }

    fn project(&self, from: &str, grid: &Grid, x: &mut [f64], y: &mut [f64]) -> Outcome<()> {
        crs::project(from, &grid.crs, x, y)
    }

    fn window(&self, from: &str, region: &Region) -> Outcome<Option<[f64; 4]>> {
        crs::window(from, region)
    }

    fn datum<'a>(&self, datum: &'a str, plan: &'a str, records: usize) -> &'a str {
        if datum.is_empty() {
            return plan;
        }
        if datum.contains('[') {
            return datum; // the CRS of a geometry, as WKT
        }
        if let Some(known) = crs::of_datum(datum, plan) {
            return known;
        }
        let mut unknown = self.unknown_datums.lock().expect("no thread panics while it counts");
        *unknown.entry(datum.to_owned()).or_insert(0) += records as u64;
        plan
    }

    fn remarks(&self) -> Vec<Diagnostic> {
        let unknown = self.unknown_datums.lock().expect("no thread panics while it counts");
        let mut most: Vec<(&String, &u64)> = unknown.iter().collect();
        most.sort_by(|a, b| b.1.cmp(a.1).then(a.0.cmp(b.0)));
        let (told, rest) = most.split_at(most.len().min(DATUMS_TOLD));
        let of_all = (!rest.is_empty()).then(|| {
            let records: u64 = rest.iter().map(|(_, n)| **n).sum();
            format!("{records} records name {} other datums that are not known", rest.len())
        });
        let each =
            told.iter().map(|(datum, n)| format!("{n} records name the datum `{datum}`, which is not known"));
        each.chain(of_all)
            .map(|text| {
                Diagnostic::input(
                    "unknown_datum",
                    "geodeticDatum",
                    format!("{text}: read as the plan's `crs`"),
                )
                .cure("write datums as EPSG codes, such as EPSG:4326")
            })
            .collect()
    }

    fn degrees(&self, definition: &str) -> Outcome<bool> {
        Ok(crs::parse(definition, "[records] crs")?.is_geographic())
    }

    fn peek(&self, file: &str, wanted: Option<&str>) -> Outcome<Peek> {
        let path = self.path(file)?;
        let word = match record_files::kind(&path, file, wanted)? {
            Kind::Text => "text",
            Kind::Archive(..) => "archive",
            Kind::Zipped(..) => "zipped text",
            Kind::Parquet(_) => "Parquet",
            Kind::Vector => "",
        };
        if !word.is_empty() {
            return Ok(Peek { file: file.into(), kind: word, crs: String::new(), extent: None, count: None });
        }
        if let Ok(raster) = self.raster(file)
            && raster.raster_count() > 0
        {
            let grid = grid_in::like(&raster, file)?;
            return Ok(Peek {
                file: file.into(),
                kind: "raster",
                crs: grid.crs.label.clone(),
                extent: Some(grid.extent()),
                count: Some(grid.len() as u64),
            });
        }
        let dataset = self.vector(file)?;
        let layer = features::open_layer(&dataset, file, wanted)?;
        let crs = layer.spatial_ref().and_then(|s| crs::describe(&s)).map(|c| c.label).unwrap_or_default();
        let extent = layer.get_extent().ok().map(|e| [e.MinX, e.MinY, e.MaxX, e.MaxY]);
        Ok(Peek { file: file.into(), kind: "vector", crs, extent, count: layer.try_feature_count() })
    }
}
