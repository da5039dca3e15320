# Sourced: `environment FOLDER EXTRAS` makes a virtual environment with this project in it, unless it is up to date.
environment() {
    python=${PYTHON:-python3}
    "$python" -c 'import sys; sys.exit(sys.version_info < (3, 11))' || {
        echo "Python 3.11 or later is needed; set PYTHON to one" >&2
        exit 2
    }
    stamp="$1/installed"
    if [ ! -f "$stamp" ] || [ setup.cfg -nt "$stamp" ]; then
        "$python" -m venv "$1"
        "$1/bin/python" -m pip install --quiet --disable-pip-version-check --editable ".$2"
        touch "$stamp"
    fi
}
