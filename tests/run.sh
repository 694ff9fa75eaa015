#!/usr/bin/env bash
# The gate: format, lint, types, layers, tests. The same by hand and in continuous integration.
#   bash tests/run.sh          what every change must pass
#   bash tests/run.sh --all    also the tests marked slow
source "$(dirname "${BASH_SOURCE[0]}")/setup.sh" test

select=(-m "not slow")
[ "${1:-}" = "--all" ] && select=()

step() { printf '\n== %s\n' "$1"; shift; "$@"; }
step "format" "$PYTHON" -m ruff format --check boardsim tests
step "lint" "$PYTHON" -m ruff check boardsim tests
step "types" "$PYTHON" -m mypy
step "layers" .venv/bin/lint-imports
step "tests" "$PYTHON" -m pytest -q -n auto --dist worksteal "${select[@]}"
