#!/usr/bin/env bash
# Set up what is missing, then run all tests and say how many passed, failed and were
# skipped. Arguments go to pytest, paths as seen from the repository root:
#   scripts/run_tests.sh tests/core -k march
#
# The core's own tests and the tests inside QGIS run in two processes, because each
# loads the core under another name. Benchmarks run here once each, as a check that
# they work; scripts/run_benchmarks.sh times them.
set -uo pipefail
# shellcheck source=scripts/env.sh
. "$(dirname -- "${BASH_SOURCE[0]}")/env.sh"
scripts/setup.sh || exit 1

REPORTS=$ROOT/build/tests
rm -rf "$REPORTS"
mkdir -p "$REPORTS"

# Paths among the arguments choose the process; without paths both run.
core=() qgis=() options=()
choose_all() {
    local folder
    for folder in tests/core tests/published tests/benchmarks; do
        if [ -d "$folder" ]; then core+=("$folder"); fi
    done
    qgis+=(tests/with_qgis)
}
for argument in "$@"; do
    case "$argument" in
        tests | tests/) choose_all ;;
        tests/with_qgis*) qgis+=("$argument") ;;
        tests/*) core+=("$argument") ;;
        *) options+=("$argument") ;;
    esac
done
if [ ${#core[@]} -eq 0 ] && [ ${#qgis[@]} -eq 0 ]; then choose_all; fi

# Run pytest on one part; "no test fits" (5) is no failure of that part by itself.
failed=0
run_part() {
    local name=$1 code
    shift
    say "" "==== $name"
    "$VENV_PYTHON" -m pytest --junitxml="$REPORTS/$name.xml" "${options[@]}" "$@"
    code=$?
    if [ "$code" -ne 0 ] && [ "$code" -ne 5 ]; then failed=1; fi
}
[ ${#core[@]} -eq 0 ] || run_part core "${core[@]}"
[ ${#qgis[@]} -eq 0 ] || run_part with_qgis "${qgis[@]}"

say "" "==== summary"
"$VENV_PYTHON" - "$REPORTS" "$failed" <<'PY'
import sys
import xml.etree.ElementTree as tree
from pathlib import Path

total = dict.fromkeys(("tests", "failures", "errors", "skipped"), 0)
for path in sorted(Path(sys.argv[1]).glob("*.xml")):
    suite = tree.parse(path).getroot().find("testsuite")
    counts = {key: int(suite.get(key)) for key in total}
    bad = counts["failures"] + counts["errors"]
    good = counts["tests"] - bad - counts["skipped"]
    print(f"{path.stem}: {good} passed, {bad} failed, {counts['skipped']} skipped"
          f" in {float(suite.get('time')):.0f} s")
    for case in suite.iter("testcase"):
        skipped = case.find("skipped")
        if skipped is not None:
            print(f"  skipped: {case.get('name')}: {skipped.get('message')}")
    for key in total:
        total[key] += counts[key]
bad = total["failures"] + total["errors"]
good = total["tests"] - bad - total["skipped"]
print(f"{good} passed, {bad} failed, {total['skipped']} skipped")
if not good:
    print("error: no test ran", file=sys.stderr)
sys.exit(bool(bad) or not good or sys.argv[2] != "0")
PY
