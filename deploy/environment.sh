# Shared by quickstart and test: finds a Python, makes .venv, installs what is locked. Sourced, not run.

fail() {
    printf '%s\n' "$1" >&2
    exit 1
}

# The newest Python that is at least 3.11.
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

# install EXTRA: the environment in .venv, with the locked versions; quick when nothing changed since the last time.
install() {
    local extra="$1" python stamp
    python="$(find_python)" || exit 1
    stamp="$("$python" -V) $extra $(cat pyproject.toml deploy/requirements.txt | sha256sum) $(pwd)"
    if [ -x .venv/bin/python ] && [ "$(cat .venv/packfold-stamp 2>/dev/null)" = "$stamp" ]; then
        return
    fi
    if [ ! -x .venv/bin/pip ]; then
        echo "Making the environment .venv with $("$python" -V)."
        rm -rf .venv
        "$python" -m venv .venv || fail "Python cannot make an environment. On Debian: apt install python3-venv"
    fi
    echo "Installing Packfold and what it needs; this takes some minutes the first time."
    .venv/bin/python -m pip install --quiet --disable-pip-version-check -c deploy/requirements.txt -e ".$extra" ||
        fail "The installation did not finish. Look at the lines above; is this machine on the network?"
    printf '%s' "$stamp" >.venv/packfold-stamp
}

# Whether packages can be installed system-wide without asking anybody.
may_install() {
    command -v apt-get >/dev/null && { [ "$(id -u)" = 0 ] || sudo -n true 2>/dev/null; }
}

apt_install() {
    local front=()
    [ "$(id -u)" = 0 ] || front=(sudo -n)
    "${front[@]}" env DEBIAN_FRONTEND=noninteractive apt-get install -y -q --no-install-recommends "$@" </dev/null >/dev/null 2>&1
}

apt_update() {
    local front=()
    [ "$(id -u)" = 0 ] || front=(sudo -n)
    "${front[@]}" apt-get update -q </dev/null >/dev/null 2>&1
}
