#!/usr/bin/env bash
# Check style and layout of all Python files; "--fix" mends what can be mended.
set -euo pipefail
# shellcheck source=scripts/env.sh
. "$(dirname -- "${BASH_SOURCE[0]}")/env.sh"
scripts/setup.sh
FOLDERS=(__init__.py geomcore plugin tests scripts)
[ ! -d sample_project ] || FOLDERS+=(sample_project)
if [ "${1:-}" = --fix ]; then
    "$VENV_PYTHON" -m ruff check --fix "${FOLDERS[@]}"
    "$VENV_PYTHON" -m ruff format "${FOLDERS[@]}"
else
    "$VENV_PYTHON" -m ruff check "${FOLDERS[@]}"
    "$VENV_PYTHON" -m ruff format --check "${FOLDERS[@]}"
fi
