#!/usr/bin/env bash
# From a fresh Debian 12 and a checkout to a checked preamp: installs, builds, and runs a whole check on the
# built-in simulated rig. Needs no sound hardware and asks nothing. May be run again at any time.
set -euo pipefail
trap 'echo "quickstart: stopped at line $LINENO: the command above failed" >&2' ERR

root=$(cd "$(dirname "${BASH_SOURCE[0]}")/.." && pwd)
cd "$root"

echo "== 1 of 3: packages"
bash docs/install-packages.sh build

echo "== 2 of 3: build"
cmake --preset release -DCOLDPIN_TESTS=OFF
cmake --build --preset release

echo "== 3 of 3: check a microphone preamp on the simulated rig"
build/release/coldpin check --rig simulated --device profiles/devices/fennmark-pl2.toml \
  --serial 0042 --operator quickstart --runs build/runs
