# Sourced by the scripts beside it: make a virtual environment and say plainly what is lacking.

say() { printf '%s\n' "$*" >&2; }

find_python() {
    local candidate
    for candidate in "${PYTHON:-}" python3.13 python3.12 python3.11 python3 python; do
        [ -n "$candidate" ] || continue
        if command -v "$candidate" >/dev/null 2>&1 &&
            "$candidate" -c 'import sys; sys.exit(sys.version_info < (3, 11))' 2>/dev/null; then
            command -v "$candidate"
            return 0
        fi
    done
    say "fluxmesh needs Python 3.11 or later, and none was found."
    say "Install it (Debian or Ubuntu: apt-get install python3 python3-venv), or name one: PYTHON=/path/to/python $0"
    return 1
}

# make_venv FOLDER EXTRAS: install the project with its extras into FOLDER, once a change of what it needs
make_venv() {
    local folder=$1 extras=$2 python stamp wanted
    python=$(find_python) || exit 2
    stamp="$folder/.made-from"
    wanted="$(cat scripts/constraints.txt pyproject.toml) $("$python" --version) $extras $(pwd)"
    if [ -x "$folder/bin/python" ] && [ "$(cat "$stamp" 2>/dev/null)" = "$wanted" ]; then
        return 0
    fi
    say "Setting up $folder with $("$python" --version) ..."
    rm -rf "$folder"
    if ! "$python" -m venv "$folder"; then
        say "Python's venv module does not work. Debian or Ubuntu: apt-get install python3-venv"
        exit 2
    fi
    if ! "$folder/bin/python" -m pip install --quiet --disable-pip-version-check \
        --constraint scripts/constraints.txt --editable ".$extras"; then
        say "The packages could not be installed: is a package index (PyPI) reachable?"
        exit 2
    fi
    printf '%s' "$wanted" >"$stamp"
}
