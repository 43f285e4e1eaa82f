#!/bin/sh
# Lint, types and every test. Arguments go to pytest, for instance:  sh deploy/test.sh tests/controllers -k warm
set -eu
root=$(cd "$(dirname "$0")/.." && pwd)
. "$root/deploy/environment.sh"
prepare requirements-test.lock
echo "No test needs a system package yet: nothing is installed beside .venv, and nothing is skipped for want of one." >&2
cd "$root"
bin=$root/.venv/bin
if [ $# -gt 0 ]; then
    exec "$bin/python" -m pytest "$@"
fi
"$bin/ruff" check .
"$bin/ruff" format --check .
"$bin/mypy"
exec "$bin/python" -m pytest -n 2 --dist worksteal
