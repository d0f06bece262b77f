#!/usr/bin/env bash
# Set up what is missing, then run the main job on the sample without a screen and
# print the results and where they are.
set -euo pipefail
# shellcheck source=scripts/env.sh
. "$(dirname -- "${BASH_SOURCE[0]}")/env.sh"
scripts/setup.sh
use_headless_qgis

SAMPLE=$ROOT/build/sample
STUDY=$ROOT/sample_project/study.json
LAYERS=$SAMPLE/results.gpkg
PLOTS=$SAMPLE/plots
LOG=$SAMPLE/run.log
rm -rf "$SAMPLE"
mkdir -p "$SAMPLE"

# QGIS calls a plugin that is enabled already an error
qgis_process plugins enable heaveline > "$LOG" 2>&1 ||
    grep -q 'already enabled' "$LOG" || {
    cat "$LOG" >&2
    die "QGIS could not start the plugin"
}
say "Running the study sample_project/study.json ..."
qgis_process run heaveline:runstudy \
    --STUDY="$STUDY" --OUTPUT="$LAYERS" --PLOTS="$PLOTS" >> "$LOG" 2>&1 || {
    cat "$LOG" >&2
    die "the run failed"
}
"$VENV_PYTHON" scripts/print_results.py "$LAYERS" \
    "plots    $PLOTS" "project  $ROOT/sample_project" "log      $LOG"
