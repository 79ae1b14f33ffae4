#!/bin/sh
# Makes .venv from the hash-pinned lock when it is missing or out of date, then runs the rest of the line in it.
#   sh workflow/env.sh perdure run
#   sh workflow/env.sh pytest
set -eu

root=$(CDPATH='' cd -- "$(dirname -- "$0")/.." && pwd)
venv="$root/.venv"
lock="$root/workflow/envs/perdure.lock"
stamp="$venv/perdure.stamp"

if [ "$#" -eq 0 ]; then
    echo "usage: sh workflow/env.sh COMMAND [ARGUMENT ...]   (for example: sh workflow/env.sh perdure run)" >&2
    exit 2
fi

suitable() {
    "$1" -c 'import sys; sys.exit(0 if (3, 12) <= sys.version_info[:2] <= (3, 13) else 1)' >/dev/null 2>&1
}

choose_python() {
    # A name on PATH may be a shim that fails or falls back to another version: ask the interpreter itself.
    for candidate in "${PERDURE_PYTHON:-}" python3.13 python3.12 python3; do
        if [ -n "$candidate" ] && suitable "$candidate"; then
            echo "$candidate"
            return 0
        fi
    done
    echo "perdure needs Python 3.12 or 3.13, and none was found on PATH." >&2
    echo "Install one (Debian: apt-get install python3.12-venv; others: your package manager), or set PERDURE_PYTHON to its path." >&2
    return 1
}

wanted=$(cd "$root" && cat "$lock" pyproject.toml | cksum)
if [ ! -f "$stamp" ] || [ "$(cat "$stamp")" != "$wanted" ] || ! "$venv/bin/python" -c '' 2>/dev/null; then
    cd "$root"
    python=$(choose_python)
    echo "perdure: setting up $venv with $("$python" --version) (about a minute, once)" >&2
    rm -rf "$venv"
    "$python" -m venv "$venv"
    "$venv/bin/python" -m pip install -qq --disable-pip-version-check --require-hashes -r "$lock" >&2
    "$venv/bin/python" -m pip install -qq --disable-pip-version-check --no-deps --no-build-isolation -e "$root" >&2
    echo "$wanted" >"$stamp"
    cd - >/dev/null
fi

PATH="$venv/bin:$PATH"
export PATH
exec "$@"
