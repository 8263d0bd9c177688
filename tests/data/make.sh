#!/usr/bin/env bash
# Makes the invented records of the tests anew (see make.py beside this file); what it makes is
# committed, so tests need neither this script nor the library it installs.
set -euo pipefail
here="$(cd "$(dirname "${BASH_SOURCE[0]}")" && pwd)"
folder="$here/../.cache/parquet-venv"
[[ -x "$folder/bin/python" ]] || python3 -m venv "$folder"
"$folder/bin/python" -m pip install --quiet --disable-pip-version-check --only-binary :all: pyarrow==26.0.1
"$folder/bin/python" -B "$here/make.py"
