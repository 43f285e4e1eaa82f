#!/bin/sh
# Renew the lock files from pyproject.toml (contributors only; needs `uv` on the path).
set -eu
cd "$(dirname "$0")/.."
compile() {
    uv pip compile --quiet --universal --python-version 3.11 --generate-hashes --no-emit-index-url --no-annotate \
        --custom-compile-command "sh deploy/lock.sh" "$@"
}
compile pyproject.toml deploy/build.in -o deploy/requirements.lock
compile pyproject.toml deploy/build.in --extra test -c deploy/requirements.lock -o deploy/requirements-test.lock
