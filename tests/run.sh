#!/usr/bin/env bash
# The one gate: format, lints, tests, doc tests, docs. Installs what is missing (Debian packages; PyPI
# packages into tests/.cache) and ends with the counts of all tests.
set -euo pipefail
cd "$(dirname "$0")/.."

missing=()
pkg-config --exists gdal 2>/dev/null || missing+=(libgdal-dev pkg-config build-essential)
command -v gdalwarp >/dev/null || missing+=(gdal-bin)
/usr/bin/python3 -c 'import osgeo' 2>/dev/null || missing+=(python3-gdal)
command -v python3 >/dev/null || missing+=(python3 python3-pip python3-venv)
if [ ${#missing[@]} -gt 0 ]; then
  if [ "$(id -u)" = 0 ]; then sudo=(); else sudo=(sudo); fi
  "${sudo[@]}" apt-get update -qq
  DEBIAN_FRONTEND=noninteractive "${sudo[@]}" apt-get install -y -qq "${missing[@]}"
fi
command -v cargo >/dev/null || { echo "tests/run.sh: cargo is missing: install Rust 1.90 or newer (rustup.rs)" >&2; exit 1; }

cargo fmt --check
cargo clippy --quiet --locked --all-targets -- -D warnings
bash -n demo/run.sh
cargo build --quiet --locked --release --bins --examples
log=$(mktemp)
trap 'rm -f "$log"' EXIT
outcome=0
cargo test --locked --no-fail-fast 2>&1 | tee "$log" || outcome=$?
count() { sed -n "s/^test result:.* \([0-9]*\) $1;.*/\1/p" "$log" | awk '{ n += $1 } END { print n + 0 }'; }
if [ "$outcome" -ne 0 ]; then
  echo "$(count passed) passed, $(count failed) failed"
  exit "$outcome"
fi
RUSTDOCFLAGS="-D warnings" cargo doc --quiet --locked --no-deps
echo "$(count passed) passed, $(count failed) failed"
