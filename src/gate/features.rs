//! Geometry of vector layers, in the coordinates of the grid.

use gdal::Dataset;
use gdal::vector::{Feature, Geometry, Layer, LayerAccess};

use crate::diag::{Diagnostic, Outcome, Warnings};
use crate::grid::{Grid, Region};
use crate::proxies::{Features, LayerPlan, Shape};

use super::crs;
use super::files::Files;
use super::grid_in::{burn, unreadable};

/// The layer of a container, by name or the only one.
pub(super) fn open_layer<'a>(dataset: &'a Dataset, file: &str, table: Option<&str>) -> Outcome<Layer<'a>> {
    let names: Vec<String> = dataset.layers().map(|l| l.name()).collect();
    let list = || names.iter().map(|n| format!("`{n}`")).collect::<Vec<_>>().join(", ");
    match table {
        Some(name) => dataset.layer_by_name(name).map_err(|_| {
            Diagnostic::input("no_table", file, format!("holds no layer `{name}`; it holds {}", list()))
                .cure("name one of them as `table`")
                .into()
        }),
        None if names.len() == 1 => dataset.layer(0).map_err(|e| unreadable(file, &e).into()),
        None if names.is_empty() => {
            Err(Diagnostic::input("no_table", file, "holds no layer").cure("give a file with one").into())
        }
        None => Err(Diagnostic::input("which_table", file, format!("holds several layers: {}", list()))
            .cure("name one of them as `table`")
            .into()),
    }
}

pub(super) fn no_crs(file: &str) -> Diagnostic {
    Diagnostic::input("no_crs", file, "the layer states no CRS")
        .cure("write one into it, e.g. `ogr2ogr -a_srs EPSG:4326 with-crs.gpkg FILE`")
}

pub(super) fn no_way(file: &str, to: &str) -> Diagnostic {
    Diagnostic::input("no_transformation", file, format!("its CRS cannot be turned into {to}"))
        .cure("bring it to the grid's CRS with `ogr2ogr -t_srs`")
}

/// Applies an attribute filter.
pub(super) fn filter(layer: &mut Layer, file: &str, query: Option<&str>) -> Outcome<()> {
    let Some(query) = query else { return Ok(()) };
    let names = columns(layer);
    let place = format!("{file}, layer {}", layer.name());
    layer.set_attribute_filter(query).map_err(|e| bad_where(&place, &names, &e.to_string()).into())
}

fn columns(layer: &Layer) -> String {
    layer.defn().fields().map(|f| format!("`{}`", f.name())).collect::<Vec<_>>().join(", ")
}

fn bad_where(place: &str, columns: &str, error: &str) -> Diagnostic {
    Diagnostic::plan("bad_where", place, format!("`where` does not parse: {error}"))
        .cure(format!("the columns are {columns}"))
}

/// Forgets what GDAL last complained of.
pub(super) fn forget_errors() {
    // SAFETY: resets a number and a text that GDAL owns
    unsafe { gdal_sys::CPLErrorReset() };
}

/// What GDAL complained of since, where it was an error.
pub(super) fn last_error() -> Option<String> {
    // SAFETY: both calls read what GDAL owns for this thread; the text is copied at once
    unsafe {
        if gdal_sys::CPLGetLastErrorType() < gdal_sys::CPLErr::CE_Failure {
            return None;
        }
        let text = std::ffi::CStr::from_ptr(gdal_sys::CPLGetLastErrorMsg());
        Some(text.to_string_lossy().into_owned())
    }
}

/// A feature's geometry, where it has one that is not empty; asking one that is not there whether it is
/// empty would be an error to GDAL.
pub(super) fn geometry_of<'a>(feature: &'a Feature) -> Option<&'a Geometry> {
    // SAFETY: the pointer is compared, not followed
    feature.geometry().filter(|g| unsafe { !g.c_geometry().is_null() } && !g.is_empty())
}

/// What was left out of a layer.
#[derive(Default)]
struct Left {
    empty: usize,
    unplaced: usize,
}

/// Reads the geometry of a layer.
pub(super) fn read(
    files: &Files,
    plan: &LayerPlan,
    region: &Region,
    warnings: &mut Warnings,
) -> Outcome<Features> {
    let grid = region.grid();
    let file = plan.file.as_str();
    let dataset = files.vector(file)?;
    let mut layer = open_layer(&dataset, file, plan.table.as_deref())?;
    let place = format!("{file}, layer {}", layer.name());
    filter(&mut layer, file, plan.filter.as_deref())?;
    let from = layer.spatial_ref().ok_or_else(|| no_crs(file))?;
    let to = crs::parse(&grid.crs.wkt, "grid")?;
    let transform = crs::transform(&from, &to).ok_or_else(|| no_way(file, &grid.crs.label))?;
    let piece = if from == to { f64::INFINITY } else { piece(&from) };
    let mut reader = Reader { file, piece, parts: Vec::new(), polygons: Vec::new(), left: Left::default() };
    forget_errors();
    for feature in layer.features() {
        reader.feature(&feature)?;
    }
    if let Some(error) = last_error() {
        // a filter may be understood only when the first feature is asked for
        return Err(match &plan.filter {
            Some(_) => bad_where(&place, &columns(&layer), &error),
            None => Diagnostic::input("unreadable", place, format!("cannot be read to its end: {error}"))
                .cure("check that the file is whole"),
        }
        .into());
    }
    let Reader { parts, polygons, mut left, .. } = reader;
    let mut shapes = turned(parts, &transform, &mut left);
    if !from.is_geographic() && to.is_geographic() {
        shapes.iter_mut().for_each(unwrap_longitudes);
    }
    let covered = if polygons.is_empty() {
        Vec::new()
    } else {
        let turned: Vec<Geometry> =
            polygons.iter().filter_map(|p| turned_polygon(p, &from, &to, &transform).ok()).collect();
        burn(grid, &turned, false).map_err(|e| unreadable(file, &e))?
    };
    remark(&place, &left, warnings);
    if shapes.is_empty() {
        let text = match &plan.filter {
            Some(query) => format!("`where = \"{query}\"` selects nothing"),
            None => "holds no geometry".into(),
        };
        return Err(Diagnostic::input("empty_layer", place, text)
            .cure("check the file and the filter")
            .into());
    }
    within_reach(&place, &shapes, grid, warnings)?;
    Ok(Features { shapes, covered })
}

fn remark(place: &str, left: &Left, warnings: &mut Warnings) {
    if left.empty > 0 {
        let text = format!("{} features have no geometry and are left out", left.empty);
        warnings.push(Diagnostic::input("empty_geometry", place, text).cure("mend them if they matter"));
    }
    if left.unplaced > 0 {
        let text = format!(
            "{} parts have coordinates that lie nowhere on the grid's CRS and are left out",
            left.unplaced
        );
        warnings.push(Diagnostic::input("unplaced_geometry", place, text).cure("mend them if they matter"));
    }
}

/// Walks features down to their points, lines and rings.
struct Reader<'a> {
    file: &'a str,
    /// Longest piece of a line, in the layer's own units: lines are straight in the layer's CRS, and
    /// long ones bend on their way to another.
    piece: f64,
    parts: Vec<Vec<(f64, f64)>>,
    polygons: Vec<Geometry>,
    left: Left,
}

impl Reader<'_> {
    fn feature(&mut self, feature: &Feature) -> Outcome<()> {
        match geometry_of(feature) {
            None => self.left.empty += 1,
            Some(geometry) => self.geometry(geometry, feature.fid())?,
        }
        Ok(())
    }

    fn geometry(&mut self, geometry: &Geometry, fid: Option<u64>) -> Outcome<()> {
        let name = geometry.geometry_name();
        match name.as_str() {
            "POINT" | "LINESTRING" | "LINEARRING" => {
                let mut points = Vec::new();
                geometry.get_points(&mut points);
                self.parts.push(in_pieces(&points, self.piece));
            }
            "POLYGON" => {
                self.polygons.push(geometry.clone());
                self.inner(geometry, fid)?;
            }
            "MULTIPOINT" | "MULTILINESTRING" | "MULTIPOLYGON" | "GEOMETRYCOLLECTION" => {
                self.inner(geometry, fid)?
            }
            other => {
                let place = format!("{}, feature {}", self.file, fid.unwrap_or(0));
                return Err(Diagnostic::input(
                    "curved_geometry",
                    place,
                    format!("holds a {other}, which is not read"),
                )
                .cure("turn curves into lines with `ogr2ogr -nlt CONVERT_TO_LINEAR`")
                .into());
            }
        }
        Ok(())
    }

    fn inner(&mut self, geometry: &Geometry, fid: Option<u64>) -> Outcome<()> {
        (0..geometry.geometry_count()).try_for_each(|i| self.geometry(&geometry.get_geometry(i), fid))
    }
}

/// A length, in units of a CRS, over which a straight line hardly bends in another: about 2 km.
fn piece(srs: &gdal::spatial_ref::SpatialRef) -> f64 {
    if srs.is_geographic() { 0.02 } else { 2_000.0 / srs.linear_units() }
}

/// The vertices of a line, with more between those that lie far apart.
fn in_pieces(points: &[(f64, f64, f64)], piece: f64) -> Vec<(f64, f64)> {
    let mut out = Vec::with_capacity(points.len());
    for pair in points.windows(2) {
        let (a, b) = (pair[0], pair[1]);
        let n = ((b.0 - a.0).hypot(b.1 - a.1) / piece).ceil();
        let n = if n.is_finite() { n.max(1.0) } else { 1.0 };
        let at = |i: usize| (a.0 + (b.0 - a.0) * i as f64 / n, a.1 + (b.1 - a.1) * i as f64 / n);
        out.extend((0..n as usize).map(at));
    }
    out.extend(points.last().map(|p| (p.0, p.1)));
    out
}

/// A polygon in another CRS, its long sides cut into pieces first.
pub(super) fn turned_polygon(
    polygon: &Geometry,
    from: &gdal::spatial_ref::SpatialRef,
    to: &gdal::spatial_ref::SpatialRef,
    transform: &gdal::spatial_ref::CoordTransform,
) -> gdal::errors::Result<Geometry> {
    let mut copy = polygon.clone();
    if from != to {
        // SAFETY: the handle is that of `copy`, which lives on; the call adds vertices to it
        unsafe { gdal_sys::OGR_G_Segmentize(copy.c_geometry(), piece(from)) };
    }
    copy.transform_inplace(transform)?;
    Ok(copy)
}

/// Longitudes that follow each other without a leap: a line across 180° goes on past it.
fn unwrap_longitudes(shape: &mut Shape) {
    for i in 1..shape.0.len() {
        let before = shape.0[i - 1].0;
        shape.0[i].0 -= ((shape.0[i].0 - before) / 360.0).round() * 360.0;
    }
}

/// Vertices turned together, then given back to their shapes.
const BATCH: usize = 1 << 16;

fn turned(
    parts: Vec<Vec<(f64, f64)>>,
    transform: &gdal::spatial_ref::CoordTransform,
    left: &mut Left,
) -> Vec<Shape> {
    let mut shapes = Vec::with_capacity(parts.len());
    let mut batch: Vec<Vec<(f64, f64)>> = Vec::new();
    let mut vertices = 0;
    let flush = |batch: &mut Vec<Vec<(f64, f64)>>, shapes: &mut Vec<Shape>, left: &mut Left| {
        let (mut x, mut y): (Vec<f64>, Vec<f64>) = batch.iter().flatten().copied().unzip();
        crs::turn(transform, &mut x, &mut y);
        let mut from = 0;
        for part in batch.drain(..) {
            let points: Vec<(f64, f64)> = (from..from + part.len()).map(|i| (x[i], y[i])).collect();
            from += part.len();
            if points.is_empty() || points.iter().any(|p| p.0.is_nan()) {
                left.unplaced += 1;
            } else {
                shapes.push(Shape(points));
            }
        }
    };
    for part in parts {
        vertices += part.len();
        batch.push(part);
        if vertices >= BATCH {
            flush(&mut batch, &mut shapes, left);
            vertices = 0;
        }
    }
    flush(&mut batch, &mut shapes, left);
    shapes
}

/// A layer wholly elsewhere is an error when it lies farther off than the grid is wide.
fn within_reach(place: &str, shapes: &[Shape], grid: &Grid, warnings: &mut Warnings) -> Outcome<()> {
    let points = || shapes.iter().flat_map(|s| &s.0);
    let min = |of: fn(&(f64, f64)) -> f64| points().map(of).fold(f64::MAX, f64::min);
    let max = |of: fn(&(f64, f64)) -> f64| points().map(of).fold(f64::MIN, f64::max);
    let [w, s, e, n] = grid.extent();
    let (lw, ls, le, ln) = (min(|p| p.0), min(|p| p.1), max(|p| p.0), max(|p| p.1));
    let gap = (w - le).max(lw - e).max(s - ln).max(ls - n);
    let round = grid.crs.kind == crate::grid::CrsKind::Geographic;
    if gap <= 0.0 || (round && (w - le).max(lw - e) > 0.0 && (s - ln).max(ls - n) <= 0.0) {
        return Ok(());
    }
    let text = format!(
        "lies outside the grid: x {lw:.4} to {le:.4}, y {ls:.4} to {ln:.4}, the grid x {w:.4} to {e:.4}, y {s:.4} to {n:.4}"
    );
    let said = Diagnostic::input("layer_elsewhere", place, text).cure("check the layer's CRS");
    if gap > (e - w).max(n - s) {
        return Err(said.into());
    }
    warnings.push(said);
    Ok(())
}
