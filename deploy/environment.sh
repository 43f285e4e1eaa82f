# Sourced by bench.sh and test.sh: a virtual environment beside the project, made once and reused.
# Needs sh and Python 3.11 to 3.13 with venv. Everything it installs is pinned by hash in the lock file it is given.

fail() {
    printf '%s: %s\n' "$(basename "$0")" "$1" >&2
    exit 2
}

find_python() {
    for candidate in ${PYTHON:-} python3.12 python3.13 python3.11 python3; do
        command -v "$candidate" >/dev/null 2>&1 || continue
        "$candidate" -c 'import sys, venv, ensurepip; sys.exit(not (3, 11) <= sys.version_info[:2] <= (3, 13))' \
            >/dev/null 2>&1 && { command -v "$candidate"; return; }
    done
    fail "needs Python 3.11, 3.12 or 3.13 with its venv module (on Debian: apt install python3-venv), or set PYTHON to one"
}

# prepare LOCK: environment in .venv with everything LOCK names and the project itself.
prepare() {
    lock=$1
    venv=$root/.venv
    wanted=$(cat "$root/pyproject.toml" "$root/deploy/$lock" | cksum | tr -d ' \t')
    stamp=$venv/.ready-$lock
    [ -f "$stamp" ] && [ "$(cat "$stamp")" = "$wanted" ] && return
    [ -x "$venv/bin/python" ] || {
        python=$(find_python) || exit 2
        printf 'Making a virtual environment with %s ...\n' "$("$python" --version)" >&2
        "$python" -m venv "$venv" || fail "could not make $venv; is the folder writable?"
    }
    printf 'Installing what %s pins ...\n' "$lock" >&2
    "$venv/bin/python" -m pip install -qq --disable-pip-version-check --require-hashes -r "$root/deploy/$lock" ||
        fail "pip could not install what deploy/$lock names; see its message above"
    "$venv/bin/python" -m pip install -qq --disable-pip-version-check --no-deps --no-build-isolation -e "$root" ||
        fail "pip could not install the project itself; see its message above"
    printf '%s' "$wanted" >"$stamp"
}
