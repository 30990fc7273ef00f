# Sourced by workbooks/demo/run and tests/run: what a bare Debian machine needs before either.

# Debian's own Python first: it is the one that staff have, and the one that LibreOffice runs
python=${PYTHON:-}
if [ -z "$python" ]; then
    python=python3
    if /usr/bin/python3 -c 'import sys; sys.exit(sys.version_info < (3, 11))' 2>/dev/null; then
        python=/usr/bin/python3
    fi
fi

# bring PACKAGE ... : install Debian packages, as root or through sudo
bring() {
    local become=
    [ "$(id -u)" = 0 ] || become=sudo
    echo "installing $* with apt"
    $become apt-get update -qq
    DEBIAN_FRONTEND=noninteractive $become apt-get install -y -qq --no-install-recommends "$@" >/dev/null
}

# environment FOLDER WHAT ... : a virtual environment with these pip requirements
environment() {
    local folder=$1
    shift
    if ! "$python" -c 'import sys; sys.exit(sys.version_info < (3, 11))' 2>/dev/null; then
        echo "Python 3.11 or newer is needed as '$python'; name another with PYTHON=..." >&2
        return 1
    fi
    if ! "$python" -c 'import ensurepip, venv' 2>/dev/null; then
        bring python3-venv
    fi
    [ -x "$folder/bin/python" ] || "$python" -m venv "$folder"
    "$folder/bin/python" -m pip install --quiet --disable-pip-version-check "$@"
}
