"""Makes the invented hoverfly records of the tests: one table as text and as Parquet.

    bash tests/data/make.sh

Places, people and finds are invented: the Skerrow Uplands are nowhere. The Parquet files come from a
library that shares no code with the program.
"""

import csv
import pathlib
import random

import pyarrow as pa
import pyarrow.parquet as pq

HERE = pathlib.Path(__file__).parent
COLUMNS = [
    "occurrenceID",
    "decimalLongitude",
    "decimalLatitude",
    "eventDate",
    "recordedBy",
    "datasetName",
    "scientificName",
    "coordinateUncertaintyInMeters",
    "occurrenceStatus",
]
PEOPLE = ["Møna Skerrow", "José Fell", "Ane Brå", "T. Heugh | B. Linn", "B. Linn | T. Heugh", "Ötzi Garth", "Una Rigg", ""]
DATA_SETS = ["Skerrow hoverfly count", "Garth collection", "Letters to Rigg"]
KINDS = ["Skerrowia invented", "Linnia ficta", "Heughella nulla"]


def rows():
    chance = random.Random(1904)
    for n in range(160):
        outing = n // 3
        day, month = 1 + outing % 28, 1 + outing * 5 % 12
        dates = [f"2015-{month:02}-{day:02}"] * 6 + [f"2015-{month:02}", "2015", f"2015-{month:02}-{day:02}T09:30Z", ""]
        place = [f"{9.002 + 0.046 * chance.random():.6f}", f"{45.128 + 0.023 * chance.random():.6f}"]
        faults = {11: ["", ""], 23: ["200.5", "95.25"], 37: ["0", "0"], 41: ["9.5", "45.14"], 53: ["", ""]}
        yield [
            f"SK-{n:03}",
            *faults.get(n, place),
            dates[outing % len(dates)],
            PEOPLE[outing % len(PEOPLE)],
            DATA_SETS[outing % 7 % 3],
            KINDS[n % 3],
            ["30", "", "250", "5000"][[0, 1, 2, 0, 1, 3][n % 6] if n % 30 < 6 else n % 3],
            "absent" if n % 40 == 7 else "present",
        ]


def table(records):
    number = lambda text: float(text) if text else None
    columns = [[row[i] for row in records] for i in range(len(COLUMNS))]
    arrays = []
    for name, values in zip(COLUMNS, columns):
        if name.startswith("decimal") or name.startswith("coordinate"):
            arrays.append(pa.array([number(v) for v in values], pa.float64()))
        else:
            arrays.append(pa.array([v or None for v in values], pa.string()))
    return pa.table(arrays, names=COLUMNS)


def main():
    records = list(rows())
    with open(HERE / "hoverflies.csv", "w", newline="", encoding="utf-8") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(COLUMNS)
        writer.writerows(records)
    whole = table(records)
    pq.write_table(whole, HERE / "hoverflies.parquet", compression="zstd")
    parts = HERE / "hoverflies-parts"
    parts.mkdir(exist_ok=True)
    pq.write_table(whole.slice(0, 70), parts / "part-0.parquet", compression="snappy", row_group_size=20)
    rest = whole.slice(70).set_column(
        4, "recordedBy", whole.slice(70)["recordedBy"].dictionary_encode()
    )
    pq.write_table(rest, parts / "part-1.parquet", compression="gzip", use_dictionary=False)
    # days as days, times to the nanosecond, and a column that is no text: what typed tables hold
    days = [d[:10] if len(d) >= 10 else "2015-06-01" for d in whole["eventDate"].to_pylist() for d in [d or ""]]
    typed = whole.set_column(3, "eventDate", pa.array(days).cast(pa.date32()))
    stamped = whole.set_column(3, "eventDate", pa.array(days).cast(pa.timestamp("ns")))
    pq.write_table(typed.slice(0, 60), HERE / "hoverflies-days.parquet", compression="zstd")
    pq.write_table(stamped.slice(0, 60), HERE / "hoverflies-times.parquet", compression="zstd")
    pq.write_table(whole.slice(0, 0), HERE / "hoverflies-none.parquet")


main()
