# Sourced by demo.sh and test.sh: a virtual environment in the project, the package in it, ngspice when it may.
# EXTRAS: '' or '[test]'. Leaves PY set to the environment's Python. Quick when nothing has changed.
set -eu
cd "$(dirname "$0")/.."

say() { printf '%s\n' "$*" >&2; }

as_root_with_apt() { [ "$(id -u)" = 0 ] && command -v apt-get >/dev/null 2>&1; }

apt_install() {
    say "installing $* (Debian packages)"
    { apt-get update -q && DEBIAN_FRONTEND=noninteractive apt-get install -y -q --no-install-recommends "$@"; } >&2
}

find_python() {
    for candidate in "${PYTHON:-}" python3 python3.14 python3.13 python3.12 python3.11; do
        [ -n "$candidate" ] || continue
        command -v "$candidate" >/dev/null 2>&1 || continue
        "$candidate" -c 'import sys; sys.exit(sys.version_info < (3, 11))' && { printf '%s' "$candidate"; return 0; }
    done
    return 1
}

base_python=$(find_python) || {
    if as_root_with_apt; then apt_install python3 python3-venv; fi
    base_python=$(find_python) || { say "Python 3.11 or later is needed (set PYTHON to name one)."; exit 2; }
}

PY=.venv/bin/python
if ! [ -x "$PY" ] || ! "$PY" -m pip --version >/dev/null 2>&1; then
    say "making the virtual environment .venv"
    if ! "$base_python" -m venv --clear .venv >/dev/null 2>&1; then
        if as_root_with_apt; then apt_install python3-venv; fi
        "$base_python" -m venv --clear .venv || {
            say "no virtual environment could be made: install python3-venv and run this again."; exit 2; }
    fi
fi

wanted="$("$PY" -V) $EXTRAS $(cksum < pyproject.toml) $(pwd)"
stamp=".venv/installed${EXTRAS:+-test}"
if [ "$(cat "$stamp" 2>/dev/null || true)" != "$wanted" ]; then
    say "installing xcheck$EXTRAS into .venv"
    "$PY" -m pip install --quiet --disable-pip-version-check -e ".$EXTRAS"
    printf '%s\n' "$wanted" > "$stamp"
fi

has_ngspice() { "$PY" -m xcheck engine >/dev/null 2>&1; }

if ! has_ngspice; then
    if as_root_with_apt; then apt_install ngspice libngspice0 || say "ngspice could not be installed."; fi
    has_ngspice || say "ngspice was not found; install it with: apt-get install ngspice libngspice0"
fi
