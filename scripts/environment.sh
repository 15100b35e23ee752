# Sourced by the other scripts: makes .venv once and brings it up to date when pyproject.toml changes.
# Use: ensure_environment EXTRAS, for example ensure_environment standalone,test

ensure_environment() {
    local extras="$1" root python stamp wanted
    root="$(cd "$(dirname "${BASH_SOURCE[0]}")/.." && pwd)"
    cd "$root" || return 1
    python="$(find_python)" || return 1
    stamp=".venv/installed-$extras"
    wanted="$("$python" -c 'import sys; print(sys.version)') $(cat pyproject.toml | cksum)"
    (
        # Two scripts started at once must not both build the environment.
        if command -v flock >/dev/null; then flock 9; fi
        if [ -f "$stamp" ] && [ "$(cat "$stamp")" = "$wanted" ]; then exit 0; fi
        echo "Setting up .venv with the extras $extras (a minute or two the first time) ..." >&2
        if [ ! -x .venv/bin/python ]; then
            "$python" -m venv .venv || {
                echo "Cannot make .venv: on Debian or Ubuntu run 'apt-get install python3-venv'." >&2
                exit 1
            }
        fi
        .venv/bin/python -m pip install --quiet --editable ".[$extras]" || exit 1
        printf '%s' "$wanted" >"$stamp"
    ) 9>.venv.lock
}

find_python() {
    local candidate
    for candidate in "${PYTHON:-}" python3 python3.13 python3.12 python3.11 python3.10; do
        [ -n "$candidate" ] || continue
        if "$candidate" -c 'import sys; sys.exit(not (3, 10) <= sys.version_info < (3, 14))' 2>/dev/null; then
            echo "$candidate"
            return 0
        fi
    done
    echo "Cannot find Python 3.10 to 3.13; install one or name it: PYTHON=/path/to/python bash $0" >&2
    return 1
}
