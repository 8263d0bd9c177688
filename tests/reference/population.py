"""Total population before and after it is brought to the grid."""

import tempfile

import numpy as np
from rasterio.warp import transform

import study

WEST, NORTH, CELL, SIDE = 500_000.0, 5_000_000.0, 250.0, 80

PLAN = study.HEAD + """[[layer]]
name = "people"
measure = "value"
file = "people.tif"
resample = "sum"
missing = 0
[[candidate]]
name = "access"
uses = { people = { curve = "power", exponent = 0.5 } }
base = 0.1
[holdout]
split = "random"
folds = 3
resamples = 39
[surface]
candidate = "access"
[output]
details = true
"""


def total_on_grid(values, origin, cell, crs):
    """Sum of the layer the program lays on the grid."""
    rng = np.random.default_rng(1)
    with tempfile.TemporaryDirectory() as folder:
        study.raster(folder, "land.tif", np.ones((SIDE, SIDE)), (WEST, NORTH), CELL)
        study.points(folder, WEST + rng.random(60) * 2e4, NORTH - rng.random(60) * 2e4)
        study.raster(folder, "people.tif", values, origin, cell, crs)
        study.run(folder, PLAN)
        return study.read(folder, "layer-people.tif").sum()


def towns(x, y):
    """People per square kilometre: two towns, and none near the rim of the grid."""
    near = lambda cx, cy, r: np.clip(1 - ((x - WEST - cx) ** 2 + (NORTH - y - cy) ** 2) / r**2, 0, None)
    return 900 * near(7_000, 8_000, 5_500) + 400 * near(13_500, 12_000, 5_000)


def main():
    rng = np.random.default_rng(7)
    for factor in (1, 2, 5):
        n, cell = SIDE * factor, CELL / factor
        values = rng.gamma(0.3, 40, (n, n))
        found = total_on_grid(values, (WEST, NORTH), cell, study.CRS)
        study.expect(f"aligned, {factor} x {factor} to a cell", found, values.sum(), 1e-6 * values.sum())
    inner = np.zeros((30, 30))
    inner[3:27, 3:27] = rng.gamma(0.3, 40, (24, 24))
    found = total_on_grid(inner, (WEST + 500.0, NORTH - 750.0), 2 * CELL, study.CRS)
    study.expect("aligned, coarser than the grid", found, inner.sum(), 1e-6 * inner.sum())

    found, due = shifted(towns)
    study.expect("shifted by parts of a cell", found, due, 1e-3 * due)
    for crs, cell in (("EPSG:4326", 0.0011), ("EPSG:4326", 0.004), ("EPSG:3035", 170.0), ("EPSG:3035", 600.0)):
        found, due = in_other_crs(crs, cell)
        study.expect(f"from {crs}, cells of {cell:g}", found, due, 1e-3 * due)


def shifted(density):
    cell, n = 170.0, 110
    origin = (WEST + 611.0, NORTH - 433.0)
    x = origin[0] + cell * (np.arange(n) + 0.5)
    y = origin[1] - cell * (np.arange(n) + 0.5)
    values = density(x[None, :], y[:, None]) * (cell / 1000) ** 2
    return total_on_grid(values, origin, cell, study.CRS), values.sum()


def in_other_crs(crs, cell):
    """A raster in another reference system that covers the grid and more."""
    rim = np.linspace(0, 2e4, 21)
    x = np.r_[WEST + rim, WEST + rim, np.full(21, WEST), np.full(21, WEST + 2e4)]
    y = np.r_[np.full(21, NORTH), np.full(21, NORTH - 2e4), NORTH - rim, NORTH - rim]
    x, y = transform(study.CRS, crs, x, y)
    west, north = min(x) - 2 * cell, max(y) + 2 * cell
    columns = int((max(x) - west) / cell) + 2
    rows = int((north - min(y)) / cell) + 2
    across, down = np.meshgrid(west + cell * (np.arange(columns) + 0.5), north - cell * (np.arange(rows) + 0.5))
    east, up = transform(crs, study.CRS, across.ravel(), down.ravel())
    values = towns(np.array(east), np.array(up)).reshape(rows, columns)
    return total_on_grid(values, (west, north), cell, crs), values.sum()


if __name__ == "__main__":
    main()
