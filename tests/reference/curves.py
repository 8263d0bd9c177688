"""Scales of falling curves fitted to simulated points, against the closed forms.

With even availability on a plane, a straight line far longer and a strip far wider than the scale, the
maximum-likelihood scale of a half-normal is sqrt(mean of squared distances) (Buckland et al. 2001,
Introduction to Distance Sampling, ch. 3), of an exponential the mean distance.
"""

import tempfile

import numpy as np

import study

WEST, NORTH, CELL, COLUMNS, ROWS = 500_000.0, 5_000_000.0, 10.0, 1000, 8
MIDDLE = WEST + CELL * COLUMNS / 2

PLAN = study.HEAD + """[[layer]]
name = "road"
measure = "distance"
file = "road.geojson"
[[candidate]]
name = "access"
uses = { road = { curve = "%s" } }
base = 0
[holdout]
split = "random"
folds = 3
resamples = 39
[surface]
candidate = "access"
"""


def fitted(curve, away, rng):
    """The scale the program fits to points this far from the road."""
    with tempfile.TemporaryDirectory() as folder:
        study.raster(folder, "land.tif", np.ones((ROWS, COLUMNS)), (WEST, NORTH), CELL)
        study.line(folder, "road.geojson", [[MIDDLE, NORTH + 1e4], [MIDDLE, NORTH - 1e4]])
        study.points(folder, MIDDLE + away, NORTH - rng.random(len(away)) * CELL * ROWS)
        figures = study.run(folder, PLAN % curve)
    return study.candidate(figures, "access")["parameters"]["road.scale"]


def check(curve, scale, away, closed):
    rng = np.random.default_rng(12)
    away = away[np.abs(away) < CELL * COLUMNS / 2]
    found = fitted(curve, away, rng)
    due = closed(np.abs(away))
    study.expect(f"{curve}: scale", found["value"], due, 0.005 * due)
    if not found["low"] < found["value"] < found["high"]:
        raise SystemExit(f"{curve}: no interval around the scale: {found}")
    if not found["low"] < scale < found["high"]:
        print(f"{curve}: the interval {found['low']:.1f} to {found['high']:.1f} misses the true {scale}")


def main():
    rng = np.random.default_rng(2001)
    check("half-normal", 600, rng.normal(0, 600, 4000), lambda d: np.sqrt(np.mean(d**2)))
    check("exponential", 350, rng.laplace(0, 350, 4000), np.mean)


if __name__ == "__main__":
    main()
