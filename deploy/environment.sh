# shellcheck shell=sh
# Read by start.sh and test.sh: finds Python and makes the environment that a lock describes.
#
# The environment is .venv in the checkout or, where that cannot be written, venv in the state
# folder of the user. RIMEWARD_VENV names another one, which is used as it stands: for those who
# install the lock by their own means, without a network for instance.

checkout=$(CDPATH='' cd -- "$(dirname -- "$0")/.." && pwd -P)
script=$(basename -- "$0")

say() {
    printf '%s: %s\n' "$script" "$*" >&2
}

fail() {
    say "$*"
    exit 1
}

# environment LOCK: makes the environment if need be, and sets `venv`.
environment() {
    lock=$checkout/deploy/$1
    if [ -n "${RIMEWARD_VENV:-}" ]; then
        venv=$RIMEWARD_VENV
        unset RIMEWARD_VENV # It is a setting of this script, not of the service.
        runs "$venv/bin/python" ||
            fail "RIMEWARD_VENV names $venv, which holds no bin/python of 3.11 or newer."
        return
    fi
    venv=$(place)
    stamp=$venv/rimeward-${1%.lock}.stamp
    is_current && return
    say "Making the environment in $venv; this takes a minute, once."
    if ! runs "$venv/bin/python" || ! has_installer; then
        find_python
        make_venv
    fi
    install_lock
    mark >"$stamp" || fail "$stamp cannot be written."
}

runs() {
    [ -x "$1" ] && "$1" -c 'import sys; sys.exit(sys.version_info < (3, 11))' 2>/dev/null
}

# The stamp is written last, so that an interrupted installation is taken up again.
is_current() {
    [ -f "$stamp" ] && runs "$venv/bin/python" && [ "$(mark)" = "$(cat "$stamp")" ]
}

mark() {
    "$venv/bin/python" - "$lock" <<'PYTHON'
import hashlib, pathlib, platform, sys

print(platform.python_version(), hashlib.sha256(pathlib.Path(sys.argv[1]).read_bytes()).hexdigest())
PYTHON
}

place() {
    state=${XDG_STATE_HOME:-${HOME:-}/.local/state}
    for candidate in "$checkout/.venv" "$state/rimeward/venv"; do
        if mkdir -p "$candidate" 2>/dev/null && [ -w "$candidate" ]; then
            printf '%s\n' "$candidate"
            return
        fi
    done
    fail "Neither $checkout/.venv nor $state/rimeward/venv can be written: set XDG_STATE_HOME to" \
        "a folder that can."
}

# Sets `python` to the newest Python from 3.14 down to 3.11, or to a python3 that is new enough.
find_python() {
    for python in python3.14 python3.13 python3.12 python3.11 python3 python; do
        python=$(command -v "$python") && runs "$python" && return
    done
    if old=$(python3 -c 'import platform; print(platform.python_version())' 2>/dev/null); then
        fail "Python 3.11 or newer is needed, and python3 is $old here: install a newer one beside it."
    fi
    fail "Python 3.11 or newer is needed, and there is no python3 here: install it first."
}

has_installer() {
    command -v uv >/dev/null || "$venv/bin/python" -c 'import pip' 2>/dev/null
}

make_venv() {
    if [ -n "$(ls -A "$venv")" ] && [ ! -f "$venv/pyvenv.cfg" ]; then
        fail "$venv holds something else than an environment of Python: move it away."
    fi
    if command -v uv >/dev/null; then
        uv venv --quiet --clear --python "$python" "$venv" || fail "uv could not make $venv."
        return
    fi
    if ! "$python" -c 'import venv, ensurepip' 2>/dev/null; then
        version=$("$python" -c 'import sys; print("%d.%d" % sys.version_info[:2])')
        fail "Python $version lacks its venv module: on Debian or Ubuntu install the package" \
            "python$version-venv, elsewhere install uv."
    fi
    "$python" -m venv --clear "$venv" || fail "$python could not make $venv."
}

install_lock() {
    if command -v uv >/dev/null; then
        uv pip install --quiet --python "$venv/bin/python" --require-hashes -r "$lock"
    else
        "$venv/bin/python" -m pip install --quiet --disable-pip-version-check --no-input \
            --require-hashes -r "$lock"
    fi || fail "The locked packages could not be installed. Can the package index be reached?" \
        "Another one is set with PIP_INDEX_URL, or UV_DEFAULT_INDEX where uv is installed."
}
