"""Kernel density with the per-point edge correction, against the exact direct sum.

Jones (1993); Diggle (2010) eq. 18.9: sum over points of K(u - x)/e(x), e by the normal distribution
function of scipy. The points are the redwood seedlings of Strauss (1975) and Ripley (1977), 62 points
in a unit square, here 1000 m wide.
"""

import sys
import tempfile

import numpy as np
from scipy.stats import norm

import study

X = """.36 .44 .48 .48 .5 .76 .78 .78 .84 .86 .9 .9 .9 .9 .18 .18 .2 .6 .62 .64 .64 .68 .68 .7 .72 .1 .12 .12
.14 .18 .18 .2 .2 .22 .24 .52 .5 .58 .94 .96 .22 .22 .26 .44 .48 .5 .9 .9 .48 .52 .56 .999 .44 .48 .34 .38
.26 .4 .28 .74 .86 .96"""
Y = """-.08 -.1 -.08 -.14 -.1 -.14 -.12 -.16 -.08 -.18 -.08 -.1 -.16 -.2 -.4 -.38 -.42 -.34 -.34 -.36 -.28
-.32 -.24 -.28 -.26 -.58 -.58 -.62 -.58 -.56 -.54 -.52 -.5 -.46 -.48 -.58 -.6 -.58 -.52 -.54 -.8 -.84 -.7
-.76 -.78 -.76 -.76 -.78 -.68 -.66 -.64 -.84 -.82 -.82 -.84 -.84 -.86 -.86 -.86 -.9 -.9 -.96"""
X, Y = (np.array([float(v) for v in text.split()]) for text in (X, Y))
SIGMA, WEST, NORTH = 0.07, 500_000.0, 5_000_000.0

PLAN = study.HEAD + """[[candidate]]
name = "recorded"
density = { kernel = "gaussian", bandwidth = "70 m", edges = "renormalise" }
[holdout]
split = "random"
resamples = 39
[surface]
candidate = "recorded"
floor = 0
per = "km2"
scale = "%s"
"""


def exact(x, y):
    """Intensity per unit square at the crossings of `x` and `y`."""
    inside = lambda v, low: norm.cdf((low + 1 - v) / SIGMA) - norm.cdf((low - v) / SIGMA)
    mass = inside(X, 0) * inside(Y, -1)
    in_x = norm.pdf((x[:, None] - X) / SIGMA) / SIGMA
    in_y = norm.pdf((y[:, None] - Y) / SIGMA) / SIGMA
    return np.einsum("ip,jp->ij", in_y / mass, in_x)


def largest_error(n):
    """Largest difference from the exact values, over the peak, on n x n cells."""
    centre = (np.arange(n) + 0.5) / n
    due = exact(centre, -centre)
    with tempfile.TemporaryDirectory() as folder:
        study.raster(folder, "land.tif", np.ones((n, n)), (WEST, NORTH), 1000 / n)
        study.points(folder, WEST + 1000 * X, NORTH + 1000 * Y)
        study.run(folder, PLAN % "mean")
        found = len(X) * study.read(folder, "effort.tif")
        study.expect(f"points over {n} x {n} cells", found.mean(), len(X), 1e-6 * len(X))
        figures = study.run(folder, PLAN.replace('per = "km2"', 'per = "cell"') % "sum")
        study.expect("sum of the raster", study.read(folder, "effort.tif").sum(), 1, 1e-6)
        study.expect("sum in effort.json", figures["surface"]["sum"], 1, 1e-9)
    return np.abs(found - due).max() / due.max()


def main():
    at = lambda x, y: exact(np.array([x]), np.array([y]))[0, 0]
    # the direct sum itself, against values worked out elsewhere
    study.expect("exact at (.2, -.5)", at(0.2, -0.5), 232.79466973, 1e-6)
    study.expect("exact at (1, -1)", at(1.0, -1.0), 52.34898721, 1e-6)
    errors = {n: largest_error(n) for n in (128, 256, 512)}
    print("largest error over the peak:", ", ".join(f"{n}: {e:.3%}" for n, e in errors.items()))
    if not errors[256] < 0.01:
        sys.exit("the error at 256 x 256 is not below 1 % of the peak")
    if not errors[512] < errors[256] < errors[128]:
        sys.exit("the error does not fall as the grid is refined")


if __name__ == "__main__":
    main()
