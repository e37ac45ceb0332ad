# shellcheck shell=bash
# Shared by quickstart and test: finds a Python, makes .venv, installs what is locked. Sourced, not run.

fail() {
    printf '%s\n' "$1" >&2
    exit 1
}

# The first Python that is at least 3.11; libraries come ready-made for the versions that are named first.
find_python() {
    local candidate
    for candidate in python3.13 python3.12 python3.11 python3 python3.14; do
        if command -v "$candidate" >/dev/null &&
            "$candidate" -c 'import sys; sys.exit(sys.version_info < (3, 11))' 2>/dev/null; then
            printf '%s' "$candidate"
            return
        fi
    done
    fail "Packfold needs Python 3.11 or newer. On Debian 12 or later: apt install python3 python3-venv"
}

# stamp PYTHON EXTRA: what an environment was made from; the same again means that nothing needs to be installed.
stamp() {
    printf '%s %s %s %s' "$("$1" -V)" "$2" "$(cat pyproject.toml deploy/requirements.txt | sha256sum)" "$PWD"
}

# install EXTRA: the environment in .venv, with the locked versions; quick when nothing changed since the last time.
install() {
    local extra="$1" python wanted
    python="$(find_python)" || exit 1
    wanted="$(stamp "$python" "$extra")"
    if [ -x .venv/bin/python ] && [ "$(cat .venv/packfold-stamp 2>/dev/null)" = "$wanted" ]; then
        return
    fi
    # An environment that was moved, or left half made, or made for another Python, is made anew.
    if ! .venv/bin/python -m pip --version >/dev/null 2>&1 || [ "$(.venv/bin/python -V)" != "$("$python" -V)" ]; then
        echo "Making the environment .venv with $("$python" -V)."
        rm -rf .venv
        "$python" -m venv .venv || fail "Python cannot make an environment. On Debian: apt install python3-venv"
    fi
    echo "Installing Packfold and what it needs; this takes some minutes the first time."
    .venv/bin/python -m pip install --quiet --disable-pip-version-check -c deploy/requirements.txt -e ".$extra" ||
        fail "The installation did not finish. Look at the lines above; is this machine on the network?"
    printf '%s' "$wanted" >.venv/packfold-stamp
}

# Whether packages can be installed system-wide without asking anybody.
may_install() {
    command -v apt-get >/dev/null && { [ "$(id -u)" = 0 ] || sudo -n true 2>/dev/null; }
}

as_root() {
    if [ "$(id -u)" = 0 ]; then "$@"; else sudo -n "$@"; fi
}

# apt_install PACKAGE...: quiet, asks nothing; Debian's lists are brought up to date first.
apt_install() {
    as_root apt-get update -q </dev/null >/dev/null 2>&1 || true
    as_root env DEBIAN_FRONTEND=noninteractive apt-get install -y -q --no-install-recommends "$@" </dev/null >/dev/null 2>&1
}

has_mosquitto() {
    [ -x /usr/sbin/mosquitto ] || command -v mosquitto >/dev/null
}
