#!/usr/bin/env bash
# Runs the demo from any folder: installs what is missing (Debian, Ubuntu), builds the program, makes
# the data, builds the effort surface, compares the candidates, and says what came out.
set -euo pipefail
cd "$(dirname "${BASH_SOURCE[0]}")/.."

say() { printf '\n== %s\n' "$*" >&2; }
stop() { printf 'demo: %s\n' "$*" >&2; exit 1; }

# A C compiler is needed to link, GDAL to read and write maps.
install_missing() {
    local packages=()
    command -v pkg-config >/dev/null || packages+=(pkg-config)
    command -v cc >/dev/null || packages+=(gcc libc6-dev)
    if ! pkg-config --exists gdal 2>/dev/null; then packages+=(libgdal-dev); fi
    [ "${#packages[@]}" -gt 0 ] || return 0
    command -v apt-get >/dev/null ||
        stop "please install ${packages[*]} (or what they are called on this system), then run this again"
    local root=()
    if [ "$(id -u)" -ne 0 ]; then
        command -v sudo >/dev/null || stop "please install ${packages[*]} as root, then run this again"
        root=(sudo)
    fi
    say "Installing ${packages[*]}"
    ${root[@]+"${root[@]}"} apt-get update >&2
    ${root[@]+"${root[@]}"} env DEBIAN_FRONTEND=noninteractive \
        apt-get install -y --no-install-recommends "${packages[@]}" >&2
}

# Rust is left to its owner: it is mostly installed for one user, not for the system.
need_rust() {
    local wanted found
    wanted=$(sed -n 's/^rust-version = "\(.*\)"/\1/p' Cargo.toml)
    if ! command -v cargo >/dev/null && [ -x "$HOME/.cargo/bin/cargo" ]; then
        PATH="$HOME/.cargo/bin:$PATH"
    fi
    command -v cargo >/dev/null || stop "Rust is missing. Install version $wanted or newer, for example with
    sudo apt-get install rustup && rustup default stable
then run this again."
    found=$(rustc --version | cut -d' ' -f2)
    [ "$(printf '%s\n' "$wanted" "$found" | sort -V | sed -n 1p)" = "$wanted" ] ||
        stop "Rust $found is too old, $wanted or newer is needed (rustup update stable), then run this again."
}

# number FIELD: its first value in effort.json; a question mark where there is none.
number() {
    local value
    value=$(tr -d ' \n' <demo/out/effort.json | grep -o "\"$1\":[^,}]*" | sed -n '1s/^[^:]*://p') || true
    printf '%s' "${value:-?}"
}

# best_of PATTERN: the first value after PATTERN among the figures of the candidate of rank 1.
best_of() {
    local value
    value=$(tr -d ' \n' <demo/out/effort.json | sed -n 's/.*"rank":1,//p' | grep -o "$1[^,}]*" |
        sed -n '1s/.*://p') || true
    printf '%s' "${value:-?}"
}

# rounded VALUE FORMAT: the value as the format says; as it stands where it is no number.
rounded() {
    case $1 in
        *[!0-9.eE+-]* | '') printf '%s' "$1" ;;
        *) LC_ALL=C printf "$2" "$1" ;;
    esac
}

tell() {
    local chosen
    chosen=$(tr -d '\n' <demo/out/effort.json | sed -n 's/.*"surface": *{ *"candidate": *"\([^"]*\)".*/\1/p')
    printf '\n'
    printf '%s of %s records were kept: %s visits to %s places (every dropped row: demo/out/dropped.csv).\n' \
        "$(number kept)" "$(number read)" "$(rounded "$(number units)" '%.0f')" "$(number places)"
    printf 'Best on held-out visits: "%s", %s nats a visit better than no pattern (demo/out/compare/comparison.html).\n' \
        "${chosen:-?}" "$(rounded "$(best_of '"log_score":{"value":')" '%.2f')"
    printf 'Its surface: demo/out/effort.tif; effort worth %s of %s cells, on the grid of temperature.tif.\n' \
        "$(rounded "$(number effective_cells)" '%.0f')" "$(number cells_inside)"
    printf 'The report to read: demo/out/report.html; all its figures: demo/out/effort.json.\n'
    printf 'The truth, which the program never saw, to hold it against: demo/truth/effort.tif.\n'
}

install_missing
need_rust

say "Building trodden and the demo's world"
cargo build --release --locked --bin trodden --example skerrow

# The last file that the generator writes tells that all are there.
if [ ! -e demo/truth/README.txt ] || [ ! -e demo/data/records.tsv ]; then
    say "Making the Skerrow Uplands"
    cargo run --quiet --release --locked --example skerrow -- demo
fi

say "Building the effort surface"
cargo run --quiet --release --locked --bin trodden -- build demo/plan.toml -o demo/out

say "Comparing the candidates"
cargo run --quiet --release --locked --bin trodden -- compare demo/plan.toml -o demo/out/compare

tell
