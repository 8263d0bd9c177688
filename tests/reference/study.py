"""Small studies for the outside checks: writes fixtures, runs the program, reads its results."""

import json
import os
import subprocess
import sys

import numpy as np
import rasterio
from rasterio.transform import from_origin

CRS = "EPSG:32632"


def raster(folder, name, values, origin, cell, crs=CRS, nodata=None):
    """Writes a GeoTIFF of 64-bit numbers; `origin` is its upper left corner."""
    with rasterio.open(
        os.path.join(folder, name), "w", driver="GTiff", dtype="float64", count=1, crs=crs, nodata=nodata,
        height=values.shape[0], width=values.shape[1], transform=from_origin(*origin, *np.broadcast_to(cell, 2)),
    ) as target:
        target.write(values.astype("float64"), 1)


def read(folder, name):
    """The first band of a raster the program wrote, not-a-number where it has no data."""
    with rasterio.open(os.path.join(folder, "out", name)) as source:
        values = source.read(1).astype("float64")
        values[values == source.nodata] = np.nan
        return values


def points(folder, x, y, name="records.tsv"):
    """Writes records with projected coordinates, each by an observer of its own."""
    with open(os.path.join(folder, name), "w", encoding="utf-8") as target:
        target.write("x\ty\twho\n")
        target.writelines(f"{float(a)!r}\t{float(b)!r}\tobserver {i}\n" for i, (a, b) in enumerate(zip(x, y)))


def line(folder, name, ends, crs=CRS):
    """Writes one straight line as GeoJSON."""
    system = {"type": "name", "properties": {"name": f"urn:ogc:def:crs:EPSG::{crs.split(':')[1]}"}}
    geometry = {"type": "LineString", "coordinates": ends}
    feature = {"type": "Feature", "properties": {}, "geometry": geometry}
    with open(os.path.join(folder, name), "w", encoding="utf-8") as target:
        json.dump({"type": "FeatureCollection", "crs": system, "features": [feature]}, target)


HEAD = """title = "An outside check"
seed = 11
[grid]
like = "land.tif"
[records]
file = "records.tsv"
longitude = "x"
latitude = "y"
crs = "EPSG:32632"
count = "records"
"""


def run(folder, plan, command="build"):
    """Runs the program over a plan and gives its figures."""
    with open(os.path.join(folder, "plan.toml"), "w", encoding="utf-8") as target:
        target.write(plan)
    program = os.environ["TRODDEN"]
    ran = subprocess.run([program, command, "plan.toml", "--json"], cwd=folder, capture_output=True, text=True)
    if ran.returncode != 0:
        sys.exit(f"{command} ended with {ran.returncode}: {ran.stderr}")
    return json.loads(ran.stdout)


def candidate(figures, name):
    """The figures of one candidate."""
    return next(c for c in figures["candidates"] if c["name"] == name)


def expect(what, found, due, tolerance):
    """Fails, saying so, where a number is not within a tolerance of what it should be."""
    print(f"{what}: {found:.9g}, due {due:.9g} (tolerance {tolerance:.3g})")
    if not abs(found - due) <= tolerance:
        sys.exit(f"{what} is off by {abs(found - due):.3g}")
