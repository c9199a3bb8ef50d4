# Sourced by the tools beside it: finds a Python, makes the project's environment, installs once.
# usage: . tools/environment.sh EXTRA     sets PYTHON and TAGSTREAM_TOP, or explains and exits 1
#
# TAGSTREAM_PYTHON   the Python to use, when the right one is not found
# TAGSTREAM_WHEELS   a folder of wheels to install from, without a network

TAGSTREAM_TOP=$(cd "$(dirname "${BASH_SOURCE[0]}")/.." && pwd)
_extra=$1

_say() { printf '%s\n' "$*" >&2; }

_find_python() {
    local candidate version found=""
    for candidate in "${TAGSTREAM_PYTHON:-}" python3.13 python3.12 python3.11 python3; do
        [ -n "$candidate" ] && command -v "$candidate" >/dev/null 2>&1 || continue
        version=$("$candidate" -c 'import sys; print("%d.%d" % sys.version_info[:2])' 2>/dev/null) || continue
        found="$found $candidate ($version)"
        if "$candidate" -c 'import sys; sys.exit(sys.version_info < (3, 11))'; then
            BASE_PYTHON=$candidate
            return
        fi
    done
    _say "Python 3.11 or newer is needed; found:${found:- none}."
    _say "Install one, or name it: TAGSTREAM_PYTHON=/path/to/python3.12 $0"
    exit 1
}

_check_venv_module() {
    "$BASE_PYTHON" -c 'import venv, ensurepip' 2>/dev/null && return
    _say "$BASE_PYTHON cannot make environments: its modules venv and ensurepip are missing."
    _say "On Debian and Ubuntu: apt install python3-venv"
    exit 1
}

_choose_folder() {
    VENV=$TAGSTREAM_TOP/.venv
    [ -w "$TAGSTREAM_TOP" ] && return
    VENV=${XDG_CACHE_HOME:-$HOME/.cache}/tagstream/venv-$(printf %s "$TAGSTREAM_TOP" | cksum | cut -d' ' -f1)
    mkdir -p "$(dirname "$VENV")"
}

_stamp() {
    { cat "$TAGSTREAM_TOP/pyproject.toml"; "$BASE_PYTHON" -VV; printf '%s' "$TAGSTREAM_TOP $_extra"; } | cksum
}

_pip() {
    local source=()
    [ -n "${TAGSTREAM_WHEELS:-}" ] && source=(--no-index --find-links "$TAGSTREAM_WHEELS")
    "$VENV/bin/python" -m pip install --quiet --disable-pip-version-check ${source[@]+"${source[@]}"} "$@" && return
    _say ""
    _say "Installing failed: the lines above name the package. Without a network, collect the wheels"
    _say "elsewhere (pip download '.[$_extra]' hatchling) and say TAGSTREAM_WHEELS=folder $0"
    exit 1
}

_install() {
    local stamp=$VENV/stamp-$_extra
    [ -x "$VENV/bin/python" ] && [ "$(cat "$stamp" 2>/dev/null)" = "$(_stamp)" ] && return
    _say "setting up in $VENV (the first time only; a minute or two)"
    [ -x "$VENV/bin/python" ] || "$BASE_PYTHON" -m venv "$VENV" || exit 1
    # The build backend first, so that the editable install needs no second environment.
    _pip 'hatchling>=1.25' editables
    if [ -w "$TAGSTREAM_TOP" ]; then
        _pip --no-build-isolation --editable "$TAGSTREAM_TOP[$_extra]"
    else
        _pip --no-build-isolation "$TAGSTREAM_TOP[$_extra]"
    fi
    _stamp >"$stamp"
}

_find_python
_check_venv_module
_choose_folder
if command -v flock >/dev/null 2>&1; then
    exec 9>"$VENV.lock" && flock 9  # two first starts at once would trip over each other
fi
_install
exec 9>&-
PYTHON=$VENV/bin/python
