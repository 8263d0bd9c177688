//! All keys of a plan: the one list behind checking, messages and the reference.

use super::keys::{Bounds, Choice, Key, Kind, Lengths};

const fn key(
    section: &'static str,
    name: &'static str,
    kind: Kind,
    default: &'static str,
    meaning: &'static str,
) -> Key {
    Key::new(section, name, kind, default, meaning)
}

const fn choice(now: &'static [&'static str], later: &'static [&'static str], noun: &'static str) -> Kind {
    Kind::Choice(Choice { now, later, noun })
}

const fn length(units: &'static [&'static str], zero: bool) -> Kind {
    Kind::Length(Lengths { units, zero, words: &[], later: &[] })
}

const METRIC: &[&str] = &["m", "km"];
const ANY: &[&str] = &["m", "km", "cells"];
const SIDE: &[&str] = &["m", "km", "deg"];

const BLOCK: Kind = Kind::Length(Lengths { units: ANY, zero: false, words: &[], later: &["fit"] });
const KERNEL_WIDTH: Kind =
    Kind::Bandwidth(Lengths { units: ANY, zero: false, words: &["fit"], later: &["scott"] });
const FIELD_WIDTH: Kind = Kind::Bandwidth(Lengths { units: ANY, zero: false, words: &["fit"], later: &[] });

/// The curves of this version, falling ones first; `power` is either.
pub(super) const CURVES: &[&str] = &["exponential", "half-normal", "power", "log-linear"];
const LATER_CURVES: &[&str] = &["hazard-rate", "log-logistic", "saturating", "monotone"];

/// The keys, table by table.
#[rustfmt::skip] // one key a line
pub(super) const KEYS: &[Key] = &[
    key("", "title", Kind::Text, "", "what the study is called in its report").required(),
    key("", "seed", Kind::Whole(0, i64::MAX), "`1`", "the number all random draws are derived from"),
    key("", "grid", Kind::Table, "", "the grid of the result").required(),
    key("", "records", Kind::Table, "", "the records of the target group").required(),
    key("", "layer", Kind::Tables, "none", "something that may explain where people went"),
    key("", "candidate", Kind::Tables, "", "a way to explain the records; one at least").required(),
    key("", "holdout", Kind::Table, "all defaults", "how candidates are checked on held-out records"),
    key("", "environment", Kind::Table, "none", "rasters of the environment").later(),
    key("", "surface", Kind::Table, "all defaults", "what is delivered"),
    key("", "output", Kind::Table, "all defaults", "where the results go"),
    // [grid]
    key("grid", "like", Kind::Path, "", "a raster the result matches cell for cell; its nodata is outside"),
    key("grid", "region", Kind::Path, "", "polygons a new grid is laid over, in place of `like`"),
    key("grid", "crs", Kind::Crs, "", "the reference system of a grid over a `region`"),
    key("grid", "cell", length(SIDE, false), "", "the side of a cell of a grid over a `region`"),
    key("grid", "touching", Kind::Flag, "`false`", "whether a cell is inside when `region` touches it"),
    // [records]
    key("records", "file", Kind::RecordFiles, "", "one file of records, or a list of them: delimited text (also gzipped), a Darwin Core archive or its folder, Parquet, or a vector file; required unless there is a `source`"),
    key("records", "table", Kind::Text, "the only one", "layer or table inside the file"),
    key("records", "quotes", choice(&["double", "none"], &[], ""), "by kind of text", "how fields of a text are quoted; by default not at all between tabs, doubly otherwise"),
    key("records", "longitude", Kind::Text, "`\"decimalLongitude\"`", "column of the longitude, or easting"),
    key("records", "latitude", Kind::Text, "`\"decimalLatitude\"`", "column of the latitude, or northing"),
    key("records", "crs", Kind::Crs, "`\"EPSG:4326\"`", "the reference system of these columns"),
    key("records", "date", Kind::Text, "`\"eventDate\"`", "column of the date"),
    key("records", "observer", Kind::Text, "`\"recordedBy\"`", "column of the observer"),
    key("records", "dataset", Kind::Text, "`\"datasetName\"`", "column of the data set"),
    key("records", "taxon", Kind::Text, "`\"scientificName\"`", "column of the taxon"),
    key("records", "uncertainty", Kind::Text, "`\"coordinateUncertaintyInMeters\"`", "column of the coordinates' uncertainty, in metres"),
    key("records", "dates", Kind::Dates, "all", "keep only records of these dates, both ends included"),
    key("records", "max_uncertainty", length(METRIC, false), "none", "drop records that are vaguer; those without a value are kept"),
    key("records", "keep", Kind::Values, "all", "keep only records with one of these values in each column"),
    key("records", "leave_out", Kind::Values, "none", "leave out records with one of these values in any column"),
    key("records", "snap", length(ANY, true), "none", "records this close outside the region move to the nearest cell inside"),
    key("records", "count", choice(&["visits", "records", "places"], &[], ""), "`\"visits\"`", "what is counted as effort"),
    key("records", "empty_visits", choice(&["ignore"], &["estimate"], ""), "`\"ignore\"`", "what is done about visits that found nothing"),
    key("records", "cap", Kind::Shares, "none", "the most one observer or data set may weigh, as `{ observer = \"10 %\" }`"),
    key("records", "sensitive", Kind::Flag, "`false`", "whether coordinates must never leave").only("false"),
    key("records", "source", Kind::Tables, "none", "further files of the same record set, with columns of their own"),
    // [[records.source]]
    key("records.source", "file", Kind::RecordFiles, "", "one file of records, or a list of them").required(),
    key("records.source", "table", Kind::Text, "the only one", "layer or table inside the file"),
    key("records.source", "quotes", choice(&["double", "none"], &[], ""), "by kind of text", "how fields of a text are quoted"),
    key("records.source", "longitude", Kind::Text, "`\"decimalLongitude\"`", "column of the longitude, or easting"),
    key("records.source", "latitude", Kind::Text, "`\"decimalLatitude\"`", "column of the latitude, or northing"),
    key("records.source", "crs", Kind::Crs, "`\"EPSG:4326\"`", "the reference system of these columns"),
    key("records.source", "date", Kind::Text, "`\"eventDate\"`", "column of the date"),
    key("records.source", "observer", Kind::Text, "`\"recordedBy\"`", "column of the observer"),
    key("records.source", "dataset", Kind::Text, "`\"datasetName\"`", "column of the data set"),
    key("records.source", "taxon", Kind::Text, "`\"scientificName\"`", "column of the taxon"),
    key("records.source", "uncertainty", Kind::Text, "`\"coordinateUncertaintyInMeters\"`", "column of the coordinates' uncertainty, in metres"),
    // [[layer]]
    key("layer", "name", Kind::Name, "", "what candidates and results call the layer").required(),
    key("layer", "measure", choice(&["distance", "value"], &["travel-time", "density"], "layers"), "", "how the layer is measured in a cell").required(),
    key("layer", "file", Kind::Path, "", "lines, points or polygons for `distance`, a raster for `value`").required(),
    key("layer", "table", Kind::Text, "the only one", "layer or table inside the file; not for `value`"),
    key("layer", "where", Kind::Text, "all features", "attribute filter over the features; not for `value`"),
    key("layer", "resample", choice(&["mean", "sum", "nearest", "bilinear", "max", "min"], &[], ""), "`\"mean\"`", "how a raster is brought to the grid; only for `value`"),
    key("layer", "missing", Kind::Number(Bounds::Any), "an error", "the value where the raster has none inside the region; only for `value`"),
    key("layer", "travel", Kind::Table, "", "how fast one travels; only for `travel-time`").later(),
    key("layer", "weight", Kind::Text, "none", "column that weights the features; only for `density`").later(),
    key("layer", "bandwidth", length(ANY, false), "", "standard deviation of the kernel; only for `density`").later(),
    key("layer.travel", "roads", Kind::Table, "none", "roads and the speed on them").later(),
    key("layer.travel", "cover", Kind::Table, "none", "land cover and the speed through it").later(),
    key("layer.travel", "slope", Kind::Path, "none", "an elevation raster").later(),
    key("layer.travel", "walk", Kind::Speed, "", "the speed on foot, on the flat").later(),
    key("layer.travel.roads", "file", Kind::Path, "", "the roads").later().required(),
    key("layer.travel.roads", "column", Kind::Text, "", "column of their class").later(),
    key("layer.travel.roads", "speed", Kind::Speeds, "", "the speed by class").later(),
    key("layer.travel.cover", "file", Kind::Path, "", "a raster of classes").later().required(),
    key("layer.travel.cover", "speed", Kind::Speeds, "", "the speed by class, or `\"closed\"`").later(),
    // [[candidate]]
    key("candidate", "name", Kind::Name, "", "what results call the candidate").required(),
    key("candidate", "density", Kind::Table, "", "where was recorded, smoothed (one of `density`, `uses`, `blend`)"),
    key("candidate", "uses", Kind::Terms, "", "layers and the curves fitted over them (one of `density`, `uses`, `blend`)"),
    key("candidate", "base", Kind::FittedShare, "`\"fit\"`", "share of effort that no layer of `uses` explains"),
    key("candidate", "remainder", Kind::Table, "none", "what the layers leave unexplained, as a smooth field"),
    key("candidate", "adjust", Kind::PathList, "none", "rasters for environment terms in the fit").later(),
    key("candidate", "blend", Kind::Words, "", "candidates that are mixed, weights learned on inner folds (one of `density`, `uses`, `blend`)"),
    key("candidate.density", "kernel", choice(&["gaussian"], &["epanechnikov", "quartic"], "kernels"), "`\"gaussian\"`", "the form of the kernel"),
    key("candidate.density", "bandwidth", KERNEL_WIDTH, "`\"fit\"`", "standard deviation of the kernel per axis"),
    key("candidate.density", "edges", choice(&["renormalise"], &["uniform", "none"], "edges"), "`\"renormalise\"`", "what is done at the region's edges: each record keeps its whole weight inside"),
    key("candidate.density.bandwidth", "neighbours", Kind::Whole(1, 1_000_000), "", "as wide as it takes to hold so many records").later(),
    key("candidate.density.bandwidth", "adaptive", length(ANY, false), "", "narrower where records are dense, from this pilot width").later(),
    key("candidate.uses", "curve", choice(CURVES, LATER_CURVES, "curves"), "", "the form of the curve").required(),
    key("candidate.uses", "scale", Kind::Scale, "`\"fit\"`", "how far the curve reaches: a length for `distance`"),
    key("candidate.uses", "shape", Kind::Fitted(Bounds::Positive), "`\"fit\"`", "how sharply a falling `power` falls"),
    key("candidate.uses", "exponent", Kind::Fitted(Bounds::Any), "`\"fit\"`", "the exponent of a rising `power`"),
    key("candidate.uses", "offset", Kind::Fitted(Bounds::NotNegative), "`\"fit\"`", "added to values under a rising `power`; `\"fit\"` is the smallest positive value"),
    key("candidate.uses", "rate", Kind::Fitted(Bounds::Any), "`\"fit\"`", "the rate of `log-linear`"),
    key("candidate.remainder", "bandwidth", FIELD_WIDTH, "`\"fit\"`", "standard deviation of the kernel per axis"),
    key("candidate.remainder.bandwidth", "neighbours", Kind::Whole(1, 1_000_000), "", "as wide as it takes to hold so many records").later(),
    key("candidate.remainder.bandwidth", "adaptive", length(ANY, false), "", "narrower where records are dense, from this pilot width").later(),
    // [holdout]
    key("holdout", "split", choice(&["outings", "random", "blocks"], &["dates", "dataset", "observer"], "splits"), "`\"outings\"`", "what is held out together"),
    key("holdout", "folds", Kind::Whole(2, 1000), "`5`", "number of parts, each held out once"),
    key("holdout", "repeats", Kind::Whole(1, 1000), "`1`", "how often the splitting is done anew").only("1"),
    key("holdout", "buffer", length(ANY, true), "`\"0 km\"`", "training records this close to a held-out one are left out").only("\"0 km\""),
    key("holdout", "block", BLOCK, "a tenth of the region's larger side", "the side of a block"),
    key("holdout", "resamples", Kind::Whole(39, 1_000_000), "`999`", "resamples of blocks behind each 95 % interval; 39 is the fewest that have such an interval"),
    key("environment", "rasters", Kind::PathList, "", "the rasters, `*` standing for any part of a name").later().required(),
    // [surface]
    key("surface", "candidate", Kind::Text, "`\"best\"`", "the candidate delivered, by name or as the best on held-out records"),
    key("surface", "per", choice(&["cell", "km2"], &[], ""), "`\"cell\"`", "whether a number is the chance of a cell or a weight per area"),
    key("surface", "scale", choice(&["sum", "max", "mean"], &[], ""), "`\"sum\"`", "whether the sum, the largest or the mean is 1"),
    key("surface", "floor", Kind::Share, "`0.01`", "share of the weight that is spread evenly; below 1, which would be the uniform surface"),
    key("surface", "support", Kind::Number(Bounds::NotNegative), "`5`", "warn where fewer distinct places carry a cell's weight"),
    key("surface", "uncertainty", Kind::Flag, "`false`", "whether a raster of uncertainty is written too").only("false"),
    // [output]
    key("output", "folder", Kind::Path, "`\"out\"`", "the folder of the results"),
    key("output", "compress", choice(&["deflate", "zstd", "lzw", "none"], &[], ""), "`\"deflate\"`", "compression of the rasters"),
    key("output", "also", Kind::Words, "`[]`", "further formats beside the GeoTIFF").only("[]"),
    key("output", "details", Kind::Flag, "`false`", "whether what the result was made of is written too"),
];
