#!/usr/bin/env bash
# Fetches and prepares the open data of the real-input test (see README.md beside this file).
#
#   bash tests/real/fetch.sh [FOLDER]
#
# FOLDER defaults to tests/.cache/real. A folder that is already prepared, by this version of the
# script, is left as it is.
# Ends with 0: ready · 75: the package registry cannot be reached · 69: a tool is missing ·
# 65: what came is not what was expected.
set -euo pipefail

here="$(cd "$(dirname "${BASH_SOURCE[0]}")" && pwd)"
folder="${1:-$here/../.cache/real}"
mkdir -p "$folder"
folder="$(cd "$folder" && pwd)"

records_archive=polars_darwin_core-4.0.0.tar.gz
streets_archive=quackosm-0.19.0.tar.gz
records_sum=7038d0d02c4fe662451bf3feb25414266ee61aa7f9ea5c6786be862b1f49892f
streets_sum=90b9888963baff37c169fc6f4eec8b07a1d68228426b7a9cabbc7a685a2fd173

# What `ready` says when all that this version makes is there.
made="2: occurrence.txt, archive, archive.zip, roads, land, population"

# The grid: 10 m, 300 columns x 350 rows, upper left corner (371800, 4846000).
crs=EPSG:32632
grid=(-te 371800 4842500 374800 4846000 -tr 10 10)
residents=39050

main() {
    [[ -e "$folder/ready" && "$(cat "$folder/ready")" == "$made" ]] && exit 0
    rm -f "$folder/ready"
    for tool in python3 ogr2ogr gdal_rasterize gdalinfo sha256sum tar; do
        command -v "$tool" >/dev/null || { echo "no \`$tool\` on this machine" >&2; exit 69; }
    done
    genuine || fetch
    genuine || { echo "the archives are not the ones expected (SHA-256 differs)" >&2; exit 65; }
    work="$(mktemp -d "$folder/.work-XXXXXX")"
    trap 'rm -rf "$work"' EXIT
    unpack
    roads
    land
    people
    pack
    rm -rf "$folder/archive"
    mv -f "$work"/archive "$work"/archive.zip "$work"/*.txt "$work"/*.gpkg "$work"/*.tif "$folder/"
    printf '%s\n' "$made" >"$folder/ready"
}

genuine() {
    (cd "$folder" && sha256sum --check --status 2>/dev/null <<<"$records_sum  $records_archive
$streets_sum  $streets_archive")
}

fetch() {
    local log="$folder/download.log"
    python3 -m pip download --disable-pip-version-check --timeout 20 --retries 2 --no-deps \
        --no-binary polars-darwin-core,quackosm --dest "$folder" \
        "polars-darwin-core==4.0.0" "quackosm==0.19.0" >"$log" 2>&1 || {
        tail -n 5 "$log" >&2
        echo "the archives cannot be downloaded" >&2
        exit 75
    }
}

unpack() {
    tar -xzf "$folder/$records_archive" -C "$work"
    tar -xzf "$folder/$streets_archive" -C "$work"
    mv "$work/${records_archive%.tar.gz}/sample-dataset" "$work/archive"
    cp "$work/archive/occurrence.txt" "$work/"
    streets="$work/${streets_archive%.tar.gz}/tests/test_files"
}

# The archive as people download it.
pack() {
    python3 - "$work/archive" "$work/archive.zip" <<'PYTHON'
import pathlib, sys, zipfile
folder = pathlib.Path(sys.argv[1])
with zipfile.ZipFile(sys.argv[2], "w", zipfile.ZIP_DEFLATED) as packed:
    for path in sorted(p for p in folder.rglob("*") if p.is_file()):
        packed.write(path, path.relative_to(folder))
PYTHON
}

# Streets and other lines, as the OSM driver of GDAL reads them.
roads() {
    OGR_INTERLEAVED_READING=YES ogr2ogr -q -f GPKG -t_srs "$crs" -nln roads \
        "$work/roads.gpkg" "$streets/monaco.osm.pbf" lines
}

# 1 where a cell's centre is inside the boundary, no data elsewhere.
land() {
    ogr2ogr -q -f GPKG -t_srs "$crs" -nln boundary -nlt PROMOTE_TO_MULTI \
        "$work/boundary.gpkg" "$streets/monaco_boundary.geojson"
    gdal_rasterize -q -burn 1 -init -9999 -a_nodata -9999 -ot Float32 "${grid[@]}" \
        -l boundary "$work/boundary.gpkg" "$work/land.tif"
}

# All residents, spread evenly over the cells with a building inside the boundary.
people() {
    OGR_INTERLEAVED_READING=YES ogr2ogr -q -f GPKG -t_srs "$crs" -nln buildings \
        -where "building IS NOT NULL" "$work/buildings.gpkg" "$streets/monaco.osm.pbf" multipolygons
    built 1 "$work/built.tif"
    local each
    each="$(gdalinfo -json -stats "$work/built.tif" | python3 -c '
import json, sys
info = json.load(sys.stdin)
mean = float(info["bands"][0]["metadata"][""]["STATISTICS_MEAN"])
cells = round(mean * info["size"][0] * info["size"][1])
print(repr(float(sys.argv[1]) / cells))' "$residents")"
    built "$each" "$work/population.tif"
    rm -f "$work/built.tif" "$work/built.tif.aux.xml"
}

built() {
    gdal_rasterize -q -burn "$1" -init 0 -ot Float64 "${grid[@]}" -l buildings "$work/buildings.gpkg" "$2"
    gdal_rasterize -q -i -burn 0 -l boundary "$work/boundary.gpkg" "$2"
}

main
