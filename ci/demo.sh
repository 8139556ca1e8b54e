#!/bin/sh
# Installs xcheck into .venv (and ngspice when run as root on Debian or Ubuntu) and reviews the example decks.
EXTRAS=''
. "$(dirname "$0")/prepare.sh"
# Some example decks carry a planted mistake, so findings are expected here and are no failure of the demo.
"$PY" -m xcheck review --fail-on never netlists
