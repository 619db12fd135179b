#!/bin/sh
# Brings a fresh Debian or Raspberry Pi OS machine to where Fieldsill runs.
#
#   sh hardware/setup.sh run      install what is missing, then run on a simulated detector
#   sh hardware/setup.sh test     install what is missing, then pass the checks and the tests
#   sh hardware/setup.sh install  install what a box needs, start nothing
#   sh hardware/setup.sh tools    install what the checks and tests need too, start nothing
#
# Debian packages come through apt-get, Python packages into .venv from the lock files.
set -eu
cd "$(dirname "$0")/.."

stop() {
    echo "fieldsill: $*" >&2
    exit 3
}

python_found() {
    for python in python3 python3.13 python3.12 python3.11; do
        "$python" -c 'import sys; sys.exit(sys.version_info < (3, 11))' 2>/dev/null && return 0
    done
    return 1
}

lack() {
    missing="${missing:+$missing }$*"
}

# Leaves in $missing the Debian packages that the part named $1 still lacks.
look() {
    missing=""
    if python_found; then
        "$python" -c 'import sys; sys.exit(sys.maxsize < 2**32)' ||
            stop "needs a 64-bit system; this Python is a 32-bit one"
        "$python" -c 'import ensurepip, venv' 2>/dev/null || lack python3-venv
    elif command -v python3 >/dev/null; then
        stop "needs Python 3.11 or newer (Debian 12 or later); this is $(python3 --version)"
    else
        lack python3 python3-venv
    fi
    [ "$1" = run ] && return
    command -v make >/dev/null || lack make
    command -v sqlite3 >/dev/null || lack sqlite3
    command -v chromium >/dev/null || command -v chromium-browser >/dev/null ||
        lack chromium
    command -v rtl_433 >/dev/null || lack rtl-433
}

install_packages() {
    look "$1"
    [ -z "$missing" ] && return
    command -v apt-get >/dev/null ||
        stop "missing, and there is no apt-get to install them with: $missing"
    as_root=""
    if [ "$(id -u)" -ne 0 ]; then
        as_root="sudo"
        sudo -n true 2>/dev/null || { command -v sudo >/dev/null && [ -t 0 ]; } ||
            stop "missing; install as root, then repeat: apt-get install $missing"
    fi
    echo "fieldsill: installing Debian packages (minutes on a slow line): $missing"
    log="$(mktemp)"
    # An unreachable source of somebody else's must not stop us: the install below decides.
    $as_root apt-get -qq update >"$log" 2>&1 || true
    # shellcheck disable=SC2086 # a list of words
    $as_root env DEBIAN_FRONTEND=noninteractive \
        apt-get -qq -y --no-install-recommends install $missing >>"$log" 2>&1 || {
        tail -n 5 "$log" >&2
        stop "could not install; install as root, then repeat: apt-get install $missing"
    }
    rm -f "$log"
    look "$1"
    [ -z "$missing" ] || stop "installed, but still not found: $missing"
}

# Makes .venv hold what the part named $1 needs; a stamp spares the work when nothing changed.
install_lock() {
    lock="requirements.lock"
    [ "$1" = run ] || lock="tests/requirements.lock"
    sum="$(cat requirements.lock tests/requirements.lock pyproject.toml | cksum)"
    have="$(cat .venv/installed 2>/dev/null || true)"
    .venv/bin/python -c 'import pip' 2>/dev/null || have="nothing"
    { [ "$have" = "test $sum" ] || [ "$have" = "$1 $sum" ]; } && return
    echo "fieldsill: installing Python packages into .venv from $lock"
    [ "$have" = nothing ] && "$python" -m venv --clear .venv
    in_venv --require-hashes --only-binary :all: -r "$lock"
    in_venv --no-deps --no-build-isolation --editable .
    echo "$1 $sum" >.venv/installed
}

in_venv() {
    PYTHONWARNINGS=ignore .venv/bin/python -m pip install --quiet --disable-pip-version-check "$@" ||
        stop "could not install into .venv: see above"
}

ready() {
    [ "$(uname -s)" = Linux ] || stop "needs Linux; this is $(uname -s)"
    install_packages "$1"
    install_lock "$1"
}

task="${1:-}"
[ $# -gt 0 ] && shift
case "$task" in
run)
    ready run
    exec .venv/bin/fieldsill rehearse "$@"
    ;;
test)
    ready test
    exec make --no-print-directory test
    ;;
install)
    ready run
    ;;
tools)
    ready test
    ;;
*)
    stop "usage: sh hardware/setup.sh run | test | install | tools"
    ;;
esac
