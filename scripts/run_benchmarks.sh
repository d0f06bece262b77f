#!/usr/bin/env bash
# Time the benchmarks against their targets; arguments go to pytest. The figures of
# each run are kept in build/benchmarks.json.
set -euo pipefail
# shellcheck source=scripts/env.sh
. "$(dirname -- "${BASH_SOURCE[0]}")/env.sh"
scripts/setup.sh
exec "$VENV_PYTHON" -m pytest tests/benchmarks --benchmark-enable \
    --benchmark-json=build/benchmarks.json "$@"
