#!/bin/sh
# The one test command: style, types, tests. Arguments go to pytest.
EXTRAS='[test]'
. "$(dirname "$0")/prepare.sh"
if ! has_ngspice && [ "${CI:-}" = true ]; then
    say "ngspice is missing: in CI that is a failure."
    exit 2
fi
"$PY" -m ruff check .
"$PY" -m ruff format --check .
"$PY" -m mypy
exec "$PY" -m pytest -n auto "$@"
