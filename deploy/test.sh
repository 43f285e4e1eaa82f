#!/bin/sh
# Lint, types and every test. Arguments go to pytest, for instance:  sh deploy/test.sh tests/controllers -k warm
# No test needs a system package yet, so nothing is skipped.
set -eu
root=$(cd "$(dirname "$0")/.." && pwd)
. "$root/deploy/environment.sh"
prepare requirements-test.lock
cd "$root"
bin=$root/.venv/bin
if [ $# -gt 0 ]; then
    exec "$bin/python" -m pytest "$@"
fi
"$bin/ruff" check .
"$bin/ruff" format --check .
"$bin/mypy"
exec "$bin/python" -m pytest -n 2 --dist worksteal
