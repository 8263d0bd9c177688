"""The table library's side of `records.rs`: kept records and visits, seconds and peak memory as JSON.

Beside the columns that tell a visit it reads the uncertainty, as the program does.
"""

import json
import sys
import time

import polars as pl

WEST, NORTH, CELL, COLUMNS, ROWS = (float(v) for v in sys.argv[2:])
COLUMNS_READ = {
    "datasetName": pl.String,
    "occurrenceStatus": pl.String,
    "decimalLatitude": pl.Float64,
    "decimalLongitude": pl.Float64,
    "coordinateUncertaintyInMeters": pl.Float64,
    "eventDate": pl.String,
    "recordedBy": pl.String,
    "individualCount": pl.Float64,
}


def visits(path):
    x, y = pl.col("decimalLongitude"), pl.col("decimalLatitude")
    column, row = (x - WEST) / CELL, (y - NORTH) / -CELL
    day = pl.col("eventDate").str.slice(0, 10)  # days as text are in order, and cheaper than dates
    cell = row.floor() * COLUMNS + column.floor()
    rows = pl.scan_csv(path, separator="\t", quote_char=None, schema_overrides=COLUMNS_READ)
    kept = rows.select(list(COLUMNS_READ)).filter(
        pl.col("occurrenceStatus") != "ABSENT",
        pl.col("individualCount").is_null() | (pl.col("individualCount") != 0),
        x.is_between(-180, 180) & y.is_between(-90, 90) & ~((x == 0) & (y == 0)),
        day.is_between(pl.lit("2005-01-01"), pl.lit("2024-12-31")),
        (column >= 0) & (column <= COLUMNS) & (row >= 0) & (row <= ROWS),
    )
    by = [pl.col("recordedBy").alias("observer"), day.alias("day"), cell.cast(pl.Int32).alias("cell")]
    facts = [pl.len().alias("records"), pl.col("coordinateUncertaintyInMeters").min().alias("radius")]
    return kept.group_by(by).agg(facts).collect(engine="streaming")


def peak_kib():
    with open("/proc/self/status") as status:
        return next(int(line.split()[1]) for line in status if line.startswith("VmHWM:"))


begun = time.perf_counter()
try:
    found = visits(sys.argv[1])
    seconds = time.perf_counter() - begun
    kept = int(found["records"].sum())
    print(json.dumps({"kept": kept, "visits": found.height, "seconds": seconds, "peak_kib": peak_kib()}))
except pl.exceptions.PolarsError as error:
    print(json.dumps({"stopped": str(error).strip().splitlines()[0]}))
