#!/usr/bin/env bash
# Makes the Python environment of the outside checks: general-purpose libraries only.
#
#   bash tests/reference/venv.sh [FOLDER [REQUIREMENTS]]
#
# FOLDER defaults to tests/.cache/venv, REQUIREMENTS to those beside this file. Ends with 0: ready · 75: the package registry cannot be
# reached · 69: no Python that can make environments.
set -euo pipefail

here="$(cd "$(dirname "${BASH_SOURCE[0]}")" && pwd)"
folder="${1:-$here/../.cache/venv}"
requirements="${2:-$here/requirements.txt}"
wanted="$(sha256sum <"$requirements")"

[[ -e "$folder/ready" && "$(cat "$folder/ready")" == "$wanted" ]] && exit 0
rm -rf "$folder"
mkdir -p "$folder"
python3 -m venv "$folder" >"$folder.log" 2>&1 || {
    tail -n 3 "$folder.log" >&2
    echo "python3 cannot make an environment here" >&2
    exit 69
}
"$folder/bin/python" -m pip install --disable-pip-version-check --timeout 20 --retries 2 --only-binary :all: \
    --requirement "$requirements" >"$folder.log" 2>&1 || {
    tail -n 3 "$folder.log" >&2
    echo "the libraries cannot be installed" >&2
    exit 75
}
printf '%s\n' "$wanted" >"$folder/ready"
