"""The four scores, against scikit-learn, scipy and statsmodels.

A candidate with all parameters given has the same surface in every fold, so that the training
surfaces are known from `surface-NAME.tif` and each score can be worked out again from the files.
"""

import csv
import os
import sys
import tempfile

import numpy as np
import statsmodels.api as sm
from scipy.stats import spearmanr
from sklearn.metrics import roc_auc_score

import study

WEST, NORTH, CELL, COLUMNS, ROWS = 500_000.0, 5_000_000.0, 100.0, 60, 50

PLAN = study.HEAD + """[[layer]]
name = "road"
measure = "distance"
file = "road.geojson"
[[candidate]]
name = "fixed"
uses = { road = { curve = "half-normal", scale = "700 m" } }
base = 0.2
[[candidate]]
name = "recorded"
density = { bandwidth = "400 m" }
[holdout]
split = "random"
folds = 4
resamples = 199
[surface]
candidate = "fixed"
per = "km2"
scale = "mean"
[output]
details = true
"""


def world(folder):
    """A grid with a lake, a road, and 400 points that are more frequent near the road."""
    rng = np.random.default_rng(5)
    land = np.ones((ROWS, COLUMNS))
    land[10:18, 40:52] = -9999
    study.raster(folder, "land.tif", land, (WEST, NORTH), CELL, nodata=-9999)
    study.line(folder, "road.geojson", [[WEST, NORTH - 2_550.0], [WEST + 6_000.0, NORTH - 2_550.0]])
    y = np.where(rng.random(900) < 0.6, rng.normal(2_550, 500, 900), rng.random(900) * 5_000).clip(1, 4_999)
    x = rng.random(900) * 6_000
    on_land = land[(y // CELL).astype(int), (x // CELL).astype(int)] > 0
    study.points(folder, WEST + x[on_land][:400], NORTH - y[on_land][:400])


def held_out(folder):
    """Rows of held-out-units.csv by candidate."""
    rows = {}
    with open(os.path.join(folder, "out", "held-out-units.csv"), encoding="utf-8", newline="") as source:
        for row in csv.DictReader(source):
            rows.setdefault(row["candidate"], []).append(row)
    return rows


def column(rows, name, kind=float):
    return np.array([kind(row[name]) for row in rows])


def weight(rows):
    """What each row counts: one, unless the file says more."""
    return column(rows, "weight") if "weight" in rows[0] else np.ones(len(rows))


def auc(cells, at, weights):
    """Chance that a unit's cell outranks a cell of the region; the cells have equal areas."""
    truth = np.r_[np.ones(len(at)), np.zeros(len(cells))]
    return roc_auc_score(truth, np.r_[at, cells], sample_weight=np.r_[weights, np.ones(len(cells))])


def boyce(cells, at, weights):
    """Continuous Boyce index (Hirzel et al. 2006): 101 windows a tenth of the range wide."""
    low, high = cells.min(), cells.max()
    width = (high - low) / 10
    starts = np.linspace(low, high - width, 101)
    share = lambda v, w: np.array([w[(v >= s) & (v <= s + width)].sum() / w.sum() for s in starts])
    expected, found = share(cells, np.ones(len(cells))), share(at, weights)
    full = expected > 0
    return spearmanr(found[full] / expected[full], (starts + width / 2)[full]).statistic


def slope(density, counts):
    """Coefficient of log density in a Poisson regression of counts by cell (equal areas)."""
    fit = sm.GLM(counts, sm.add_constant(np.log(density)), family=sm.families.Poisson()).fit(tol=1e-12)
    return fit.params[1]


def whole(what, figures, by_candidate):
    """Every unit is held out once, and the log score is the mean of what the units say."""
    for name, rows in by_candidate.items():
        if len(set(column(rows, "unit", int))) != len(rows):
            sys.exit(f"{what}, {name}: a unit is held out twice")
        study.expect(f"{what}, {name}: units held out", weight(rows).sum(), figures["records"]["units"], 0)
        due = np.average(column(rows, "log_density"), weights=weight(rows))
        found = study.candidate(figures, name)["scores"]["log_score"]["value"]
        study.expect(f"{what}, {name}: log score", found, due, 1e-9)


def pooled(what, figures, rows, surface):
    """AUC, Boyce index and calibration of the fixed candidate over all units."""
    at = column(rows, "row", int), column(rows, "column", int)
    worst = np.abs(np.log(surface[at]) - column(rows, "log_density")).max()
    study.expect(f"{what}: surface at the units' cells, as log", worst, 0, 1e-6)
    counts = np.zeros(surface.shape)
    np.add.at(counts, at, weight(rows))
    land = ~np.isnan(surface)
    scores = study.candidate(figures, "fixed")["scores"]
    study.expect(f"{what}: AUC", scores["auc"]["value"], auc(surface[land], surface[at], weight(rows)), 1e-6)
    study.expect(f"{what}: Boyce", scores["boyce"]["value"], boyce(surface[land], surface[at], weight(rows)), 5e-3)
    due = slope(surface[land], counts[land])
    study.expect(f"{what}: calibration", scores["calibration_slope"]["value"], due, 1e-5)


def folds(what, by_fold, rows, surface):
    """The fixed candidate's figures by fold."""
    at = surface[column(rows, "row", int), column(rows, "column", int)]
    fold = column(rows, "fold", int)
    if set(fold) != {1, 2, 3, 4}:
        sys.exit(f"{what}: folds are {sorted(set(fold))}")
    for line in (line for line in by_fold if line["candidate"] == "fixed" and line["fold"].isdigit()):
        part = fold == int(line["fold"])
        label, w = f"{what}, fold {line['fold']}", weight(rows)[part]
        study.expect(f"{label}: units", float(line["units"]), w.sum(), 0)
        study.expect(f"{label}: log score", float(line["log_score"]), np.average(np.log(at[part]), weights=w), 1e-6)
        due = auc(surface[~np.isnan(surface)], at[part], w)
        study.expect(f"{label}: AUC", float(line["auc"]), due, 1e-6)


def check(what, plan):
    """Works all scores of a plan out again."""
    with tempfile.TemporaryDirectory() as folder:
        world(folder)
        figures = study.run(folder, plan)
        by_candidate = held_out(folder)
        surface = study.read(folder, "surface-fixed.tif")
        blocks = study.read(folder, "folds.tif")
        with open(os.path.join(folder, "out", "held-out.csv"), encoding="utf-8", newline="") as source:
            by_fold = list(csv.DictReader(source))
    rows = by_candidate["fixed"]
    whole(what, figures, by_candidate)
    pooled(what, figures, rows, surface)
    folds(what, by_fold, rows, surface)
    if what == "blocks":
        of_cell = blocks[column(rows, "row", int), column(rows, "column", int)]
        study.expect("blocks: units in another fold than their cell", (of_cell != column(rows, "fold")).sum(), 0, 0)


def main():
    visits = PLAN.replace('count = "records"', 'count = "visits"\nobserver = "who"')
    check("visits", visits)
    # without an even share, whose size would depend on the cells observed
    blocks = visits.replace('split = "random"', 'split = "blocks"\nblock = "900 m"')
    check("blocks", blocks.replace("base = 0.2", "base = 0"))
    check("records", PLAN)


if __name__ == "__main__":
    main()
