#!/bin/sh
# The main job on this machine: the simulated plant and the gateway that drives it, over real OPC UA on loopback.
# Every argument goes to `lengthsman bench`, for instance:  sh deploy/bench.sh --for 20min --quiet-plant
set -eu
root=$(cd "$(dirname "$0")/.." && pwd)
. "$root/deploy/environment.sh"
prepare requirements.lock
exec "$root/.venv/bin/lengthsman" bench "$root/deploy/tarn-row.toml" "$@"
