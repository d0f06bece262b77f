# shellcheck shell=bash disable=SC2034
# What every script shares: where things are, and how QGIS is run without a screen.
# Source it (". scripts/env.sh"); it changes into the repository root.

ROOT=$(cd -- "$(dirname -- "${BASH_SOURCE[0]}")/.." && pwd)
cd "$ROOT" || exit 1

SYSTEM_PYTHON=/usr/bin/python3   # spelled out: another python3 on PATH has no qgis
VENV_PYTHON=$ROOT/.venv/bin/python

export PYTHONNOUSERSITE=1        # packages in the user's home must not decide a result
export PYTHONDONTWRITEBYTECODE=1
unset PYTHONPATH PYTHONHOME
# A bare system has no locale at all, and file names with accents need one.
[ -n "${LC_ALL:-}${LC_CTYPE:-}${LANG:-}" ] || export LANG=C.UTF-8

say() { printf '%s\n' "$*"; }

die() {
    printf 'error: %s\n' "$*" >&2
    exit 1
}

# QGIS programs see the packages of .venv through PYTHONPATH, the plugin through the
# link build/plugins/heaveline, and a profile of their own under build/.
use_headless_qgis() {
    PYTHONPATH=$("$VENV_PYTHON" -c 'import site; print(site.getsitepackages()[0])')
    export PYTHONPATH
    export QT_QPA_PLATFORM=offscreen
    export QGIS_CUSTOM_CONFIG_PATH=$ROOT/build/profile
    export QGIS_PLUGINPATH=$ROOT/build/plugins
    export XDG_RUNTIME_DIR=$ROOT/build/run
    mkdir -p "$QGIS_CUSTOM_CONFIG_PATH" "$XDG_RUNTIME_DIR"
    chmod 700 "$XDG_RUNTIME_DIR"
}
