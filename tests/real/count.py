"""Counts what becomes of the rows of a Darwin Core archive, apart from the program.

    /usr/bin/python3 count.py ARCHIVE MASK [LIMIT]

ARCHIVE is the unpacked folder, MASK a raster that is no data outside the region, LIMIT the largest
uncertainty in metres. Python's csv module reads the text as meta.xml lays it out (Darwin Core text guide,
TDWG 2009); GDAL's bindings turn places and read the mask. The rules are the contract's, in their order;
no code is shared with the program.
"""

import collections
import csv
import json
import pathlib
import sys
import xml.etree.ElementTree as tree

try:
    from osgeo import gdal, osr
except ImportError:
    print("no GDAL bindings for /usr/bin/python3", file=sys.stderr)
    sys.exit(69)

gdal.UseExceptions()
osr.UseExceptions()
NAMESPACE = "{http://rs.tdwg.org/dwc/text/}"
ESCAPES = {"\\t": "\t", "\\n": "\n", "\\r\\n": "\r\n", "": ""}


def table(folder):
    """The core's rows as dictionaries by short term, with their line numbers; None for a ragged row."""
    core = tree.parse(folder / "meta.xml").getroot().find(NAMESPACE + "core")
    separator, end, quote = (
        ESCAPES.get(core.get(name), core.get(name))
        for name in ("fieldsTerminatedBy", "linesTerminatedBy", "fieldsEnclosedBy")
    )
    columns, constants = {}, {}
    for field in core.findall(NAMESPACE + "field"):
        term = field.get("term").rsplit("/", 1)[-1]
        if field.get("index") is None:
            constants[term] = field.get("default")
        else:
            columns[term] = int(field.get("index"))
    text = (folder / core.find(f"{NAMESPACE}files/{NAMESPACE}location").text).read_bytes()
    lines = text.decode(core.get("encoding")).split(end)
    quoting = {"quotechar": quote} if quote else {"quoting": csv.QUOTE_NONE, "quotechar": None}
    csv.field_size_limit(1 << 28)
    rows = csv.reader((line for line in lines if line), delimiter=separator, **quoting)
    width = None
    for number, row in enumerate(rows, 1):
        width = width or len(row)
        if number > int(core.get("ignoreHeaderLines")):
            named = {term: row[i] for term, i in columns.items()} if len(row) == width else None
            yield number, named and {**constants, **named}, '"' in (lines[number - 1])


def number(text):
    try:
        return float(text)
    except ValueError:
        return None


class Ground:
    def __init__(self, mask):
        raster = gdal.Open(mask)
        self.band = raster.GetRasterBand(1).ReadAsArray()
        self.nodata = raster.GetRasterBand(1).GetNoDataValue()
        self.west, self.dx, _, self.north, _, self.dy = raster.GetGeoTransform()
        degrees = osr.SpatialReference()
        degrees.ImportFromEPSG(4326)
        degrees.SetAxisMappingStrategy(osr.OAMS_TRADITIONAL_GIS_ORDER)
        own = osr.SpatialReference(raster.GetProjection())
        own.SetAxisMappingStrategy(osr.OAMS_TRADITIONAL_GIS_ORDER)
        self.way = osr.CoordinateTransformation(degrees, own)

    def cell(self, lon, lat):
        x, y, _ = self.way.TransformPoint(lon, lat)
        column, row = (x - self.west) / self.dx, (y - self.north) / self.dy
        rows, columns = self.band.shape
        if not (0 <= column < columns and 0 <= row < rows):
            return "outside_grid"
        if self.band[int(row), int(column)] == self.nodata:
            return "outside_region"
        return int(column), int(row)


def fate(row, ground, limit):
    """The rule by which a row is dropped, or its cell."""
    if row is None:
        return "unreadable_row"
    if row["occurrenceStatus"].lower() in ("absent", "not detected") or number(row["individualCount"]) == 0:
        return "absent"
    lon, lat = row["decimalLongitude"].strip(), row["decimalLatitude"].strip()
    if not lon or not lat:
        return "no_coordinate"
    lon, lat = number(lon), number(lat)
    if lon is None or lat is None or not (-180 <= lon <= 180 and -90 <= lat <= 90):
        return "impossible_coordinate"
    if lon == 0 and lat == 0:
        return "zero_zero"
    radius = number(row["coordinateUncertaintyInMeters"])
    if limit is not None and radius is not None and radius > limit:
        return "too_vague"
    return ground.cell(lon, lat)


def main():
    folder, mask = pathlib.Path(sys.argv[1]), sys.argv[2]
    limit = float(sys.argv[3]) if len(sys.argv) > 3 else None
    ground = Ground(mask)
    found = collections.Counter()
    dropped, cells = [], set()
    for line, row, quotes in table(folder):
        found["read"] += 1
        found["quotes"] += quotes
        if row is not None:
            assert row["geodeticDatum"] == "WGS84", row["geodeticDatum"]
            found["no uncertainty"] += not row["coordinateUncertaintyInMeters"].strip()
            found["999999"] += number(row["coordinateUncertaintyInMeters"]) == 999999
        what = fate(row, ground, limit)
        if isinstance(what, str):
            dropped.append([line, what])
        else:
            found["kept"] += 1
            cells.add(what)
    print(json.dumps({**found, "places": len(cells), "dropped": dropped}))


main()
