#!/usr/bin/env bash
# Make a fresh Debian 12 or 13 ready: QGIS 3.40 or newer, and .venv with the test tools.
# Quiet unless something fails; quick when nothing is missing. Run it as root, or as a
# user who may sudo. The log is build/setup.log.
set -euo pipefail
# shellcheck source=scripts/env.sh
. "$(dirname -- "${BASH_SOURCE[0]}")/env.sh"

MIN_QGIS=3.40
PACKAGES=(
    ca-certificates qgis python3-qgis qgis-providers
    python3-numpy python3-scipy python3-pyproj python3-matplotlib python3-venv
    xvfb xauth libgl1-mesa-dri      # a screen for the desktop tests, with software 3D
    fonts-open-sans                 # QGIS complains in a message bar without it
)
LOG=$ROOT/build/setup.log
mkdir -p build
: > "$LOG"

# Run a command into the log; on failure show its last lines and stop with the words.
quietly() {
    local words=$1
    shift
    if ! "$@" >> "$LOG" 2>&1; then
        tail -n 25 "$LOG" >&2
        die "$words (whole log: build/setup.log)"
    fi
}

# ---- Debian packages --------------------------------------------------------------

installed_version() {
    dpkg-query -W -f '${db:Status-Status} ${Version}\n' "$1" 2>/dev/null |
        awk '$1 == "installed" {print $2}'
}

new_enough() { dpkg --compare-versions "${1:-0}" ge "$MIN_QGIS"; }

packages_ready() {
    local count
    count=$(dpkg-query -W -f '${db:Status-Status}\n' "${PACKAGES[@]}" 2>/dev/null |
        grep -c '^installed$' || true)
    [ "$count" -eq "${#PACKAGES[@]}" ] && new_enough "$(installed_version python3-qgis)"
}

as_root() {
    if [ "$(id -u)" -eq 0 ]; then
        env DEBIAN_FRONTEND=noninteractive "$@"
    else
        sudo env DEBIAN_FRONTEND=noninteractive "$@"
    fi
}

apt() { as_root apt-get -o DPkg::Lock::Timeout=600 -o Acquire::Retries=3 "$@"; }

check_may_install() {
    if ! command -v dpkg-query >/dev/null || ! command -v apt-get >/dev/null; then
        die "this set-up needs Debian 12 or 13 (no dpkg or apt-get found here)"
    fi
    # shellcheck source=/dev/null
    . /etc/os-release
    case "${ID:-}:${VERSION_CODENAME:-}" in
        debian:bookworm | debian:trixie) ;;
        *) die "QGIS $MIN_QGIS or newer or one of its companions is missing, and this" \
               "set-up can install it only on Debian 12 (bookworm) or 13 (trixie); this" \
               "is ${PRETTY_NAME:-an unknown system}. Install by hand: ${PACKAGES[*]}" ;;
    esac
    if [ "$(id -u)" -ne 0 ]; then
        command -v sudo >/dev/null ||
            die "packages must be installed, but you are not root and there is no sudo:" \
                "run this script once as root"
        sudo -v || die "packages must be installed, but sudo refused: run as root"
    fi
}

# Debian 12 has its newer QGIS in the backports suite. It is taken from the mirror from
# which this machine takes the main suite, so no host name stands here.
add_backports() {
    local suite=$VERSION_CODENAME-backports targets mirror keys='' list
    # Release, codename and mirror of each suite set up here (the words are apt's own).
    # shellcheck disable=SC2016
    targets=$(apt-get indextargets --format '$(RELEASE)|$(CODENAME)|$(REPO_URI)')
    if grep -q "^$suite|" <<< "$targets"; then return; fi
    mirror=$(awk -F'|' -v c="$VERSION_CODENAME" \
        '$1 == c || $2 == c {print $3; exit}' <<< "$targets")
    [ -n "$mirror" ] || die "apt could read no list of packages for $VERSION_CODENAME:" \
        "is there a network, and is a mirror set up under /etc/apt? (log: build/setup.log)"
    if [ -r /usr/share/keyrings/debian-archive-keyring.gpg ]; then
        keys='[signed-by=/usr/share/keyrings/debian-archive-keyring.gpg] '
    fi
    list=/etc/apt/sources.list.d/$suite.list
    # shellcheck disable=SC2016
    as_root sh -c 'printf "%s\n" "$1" > "$2"' sh "deb $keys$mirror $suite main" "$list"
}

install_packages() {
    local target=() candidate
    check_may_install
    say "Installing QGIS and its companions (about 3 GB on a bare system) ..."
    quietly "the package lists could not be read: is there a network?" apt update
    if [ "$VERSION_CODENAME" = bookworm ]; then
        add_backports
        quietly "the package lists could not be read: is there a network?" apt update
        target=(-t "$VERSION_CODENAME-backports")
    fi
    candidate=$(apt-cache policy "${target[@]}" python3-qgis 2>> "$LOG" |
        awk '/Candidate:/ {print $2}') || true # an unknown suite is told just below
    # apt says "(none)" where it has nothing; an empty version sorts before all.
    if ! new_enough "${candidate#(none)}"; then
        tail -n 25 "$LOG" >&2
        die "the mirror offers no QGIS $MIN_QGIS or newer (found: ${candidate:-nothing});" \
            "is there a network, and does the mirror carry ${target[1]:-this suite}?"
    fi
    # QGIS alone comes from backports; the rest stays with the main suite.
    quietly "QGIS could not be installed: is there a network, and room on the disk?" \
        apt install -y --no-install-recommends "${target[@]}" qgis python3-qgis qgis-providers
    quietly "packages could not be installed: is there a network, and room on the disk?" \
        apt install -y --no-install-recommends "${PACKAGES[@]}"
    packages_ready || die "apt finished, but something of ${PACKAGES[*]} is still missing"
}

# ---- Python packages --------------------------------------------------------------

# The list stands in pyproject.toml only ("full" and "test").
wanted_python_packages() {
    "$SYSTEM_PYTHON" - <<'PY'
import tomllib
with open("pyproject.toml", "rb") as file:
    extras = tomllib.load(file)["project"]["optional-dependencies"]
print("\n".join(extras["full"] + extras["test"]))
PY
}

# Packages compiled against the system's numpy keep the system's versions.
write_constraints() {
    "$SYSTEM_PYTHON" - <<'PY'
import importlib.metadata as metadata
for name in ("numpy", "scipy", "matplotlib", "pyproj"):
    print(f"{name}=={metadata.version(name)}")
PY
}

stamp_text() {
    "$SYSTEM_PYTHON" --version
    cat build/constraints.txt build/wanted.txt
}

# True if .venv runs, was filled from this very list, and still holds all of it.
venv_ready() {
    [ -x "$VENV_PYTHON" ] && [ -f .venv/heaveline-stamp ] &&
        cmp -s .venv/heaveline-stamp <(stamp_text) &&
        "$VENV_PYTHON" - <<'PY' >> "$LOG" 2>&1
import importlib.metadata as metadata, re, sys
for line in open("build/wanted.txt"):
    metadata.version(re.match(r"[A-Za-z0-9._-]+", line).group())
sys.exit(int(metadata.version("shapely").split(".")[0]) < 2)
PY
}

fill_venv() {
    local wanted
    say "Making .venv ..."
    rm -f .venv/heaveline-stamp
    # A .venv of another place or another Python does not run: start it anew.
    if [ -d .venv ] && ! "$VENV_PYTHON" -c 'import sys; sys.exit(sys.prefix == sys.base_prefix)' \
            >> "$LOG" 2>&1; then
        rm -rf .venv
    fi
    [ -x "$VENV_PYTHON" ] || quietly "the virtual environment could not be made" \
        "$SYSTEM_PYTHON" -m venv --system-site-packages .venv
    mapfile -t wanted < build/wanted.txt
    quietly "Python packages could not be installed: is the package index reachable?" \
        "$VENV_PYTHON" -m pip install --disable-pip-version-check --no-input \
        -c build/constraints.txt "${wanted[@]}"
    # Debian's pyproj looks for its data under the prefix of the environment.
    mkdir -p .venv/share
    ln -sfn /usr/share/proj .venv/share/proj
    stamp_text > .venv/heaveline-stamp
    venv_ready || die "pip finished, but .venv lacks a package (log: build/setup.log)"
}

# ---- the whole --------------------------------------------------------------------

packages_ready || install_packages
wanted_python_packages > build/wanted.txt
write_constraints > build/constraints.txt
venv_ready || fill_venv
# QGIS finds the repository as the plugin "heaveline" by this link.
mkdir -p build/plugins
ln -sfn "$ROOT" build/plugins/heaveline
