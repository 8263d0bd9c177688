"""The raster's layout and place, by GDAL's own validator and by rasterio."""

import os
import subprocess
import sys
import tempfile

import numpy as np
import rasterio

import study

VALIDATOR = "osgeo_utils.samples.validate_cloud_optimized_geotiff"

PLAN = study.HEAD + """[[layer]]
name = "road"
measure = "distance"
file = "road.geojson"
[[candidate]]
name = "access"
uses = { road = { curve = "exponential", scale = "900 m" } }
base = 0.1
[holdout]
split = "random"
folds = 3
resamples = 39
[surface]
candidate = "access"
[output]
compress = "%s"
"""


def validator():
    """A Python that has GDAL's validator, or nothing."""
    for python in ("/usr/bin/python3", sys.executable):
        if os.path.exists(python) and subprocess.run([python, "-c", f"import {VALIDATOR}"], capture_output=True).returncode == 0:
            return python
    return None


def main():
    python = validator()
    if python is None:
        print("skipped: GDAL's validator is not installed (Debian: python3-gdal)")
    # an origin and a cell that are no short decimals
    cell, origin = 1000 / 3, (4_000_000 + 1 / 7, 3_000_000 - 1 / 3)
    land = np.ones((1300, 1100))
    land[200:400, 300:700] = np.nan
    rng = np.random.default_rng(3)
    with tempfile.TemporaryDirectory() as folder:
        study.raster(folder, "land.tif", land, origin, cell, crs="EPSG:3035", nodata=float("nan"))
        study.line(folder, "road.geojson", [[origin[0], origin[1] - 2e5], [origin[0] + 3e5, origin[1] - 1e5]], "EPSG:3035")
        study.points(folder, origin[0] + rng.random(50) * 9e4, origin[1] - rng.random(50) * 4e5)
        for compress in ("deflate", "lzw", "none"):
            study.run(folder, PLAN.replace("EPSG:32632", "EPSG:3035") % compress)
            path = os.path.join(folder, "out", "effort.tif")
            if python is not None:
                said = subprocess.run([python, "-m", VALIDATOR, path], capture_output=True, text=True)
                print(compress, "validator:", said.stdout.strip().splitlines()[-1:] or said.stderr)
                if said.returncode != 0 or "warning" in said.stdout.lower():
                    sys.exit(f"the validator says: {said.stdout}{said.stderr}")
            opened(folder, path, land)


def opened(folder, path, land):
    """Opens the raster beside its template."""
    with rasterio.open(path) as effort, rasterio.open(os.path.join(folder, "land.tif")) as like:
        same = {
            "transform": tuple(effort.transform) == tuple(like.transform),
            "CRS": effort.crs == like.crs,
            "size": effort.shape == like.shape,
            "nodata": effort.nodata == -9999,
            "number type": effort.dtypes == ("float32",),
            "mask": np.array_equal(effort.read_masks(1) > 0, ~np.isnan(land)),
            "tiles": effort.is_tiled,
            "overviews": effort.overviews(1) == [2, 4],
            "description": bool(effort.descriptions[0]),
            "settings": len(effort.tags()) > 1,
        }
        values = effort.read(1, masked=True)
    wrong = [what for what, holds in same.items() if not holds]
    if wrong:
        sys.exit(f"differs from the template: {', '.join(wrong)}")
    study.expect("sum over the raster", float(values.astype("float64").sum()), 1, 1e-5)


if __name__ == "__main__":
    main()
