# Sourced by the scripts beside it: makes and fills .venv inside the checkout.
# After `prepare EXTRA`, $python is the environment's interpreter and the working directory
# is the root of the checkout.

root=$(cd "$(dirname "${BASH_SOURCE[0]}")/.." && pwd)
cd "$root"
python=$root/.venv/bin/python

stop() {
    printf '%s\n' "$1" >&2
    exit 2
}

# Succeeds when interpreter $1 is a released Python >= 3.11 that has the modules named after it.
suits() {
    "$1" -c 'import importlib, sys
for name in sys.argv[1:]: importlib.import_module(name)
sys.exit(sys.version_info < (3, 11) or sys.version_info.releaselevel != "final")' \
        "${@:2}" >/dev/null 2>&1
}

# Prints the newest interpreter on PATH that can make an environment.
newest_python() {
    local minor name bare=
    for minor in $(seq 30 -1 11) "" none; do
        name=python3${minor:+.$minor}
        [ "$minor" != none ] || name=python
        if suits "$name" venv ensurepip; then
            command -v "$name"
            return
        elif suits "$name"; then
            bare=$name
        fi
    done
    [ -z "$bare" ] ||
        stop "$bare has no venv module: install it (on Debian: apt-get install python3-venv) and run this again"
    stop "no Python 3.11 or newer on PATH: install one and run this again"
}

# prepare EXTRA: EXTRA is "" or the name of an optional dependency group.
# Quick when nothing changed: a stamp in the environment records what it was made for.
prepare() {
    local extra=$1 base stamp wanted
    if [ ! -e .venv ]; then
        base=$(newest_python) || exit
        echo "making .venv with $base" >&2
        "$base" -m venv .venv || stop "cannot make $root/.venv: remove it and run this again"
    fi
    suits "$python" pip ||
        stop "$root/.venv holds no working Python 3.11 or newer with pip: remove it and run this again"
    wanted="$(cksum <pyproject.toml) $root $("$python" -V)"
    for stamp in ".venv/polefit-stamp-$extra" .venv/polefit-stamp-test; do
        if [ -f "$stamp" ] && [ "$(cat "$stamp")" = "$wanted" ]; then
            return
        fi
    done
    echo "installing polefit and its dependencies into .venv" >&2
    "$python" -m pip install --quiet --disable-pip-version-check --editable ".${extra:+[$extra]}" ||
        stop "the installation failed: see the lines above, then run this again"
    printf '%s\n' "$wanted" >".venv/polefit-stamp-$extra"
}
