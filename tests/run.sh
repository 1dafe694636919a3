#!/bin/bash
# Every test: installs what is missing, builds one tree, runs it through ctest. Arguments go on to ctest
# (for example: bash tests/run.sh -R waveform).
set -eu
cd "$(dirname "$0")/.."
stage() { now=$(date +%s); [ -z "${what:-}" ] || echo "== $what took $((now - since)) s"; what=$1; since=$now; }
stage "installing"
bash .ci/setup tests
stage "configuring"
cmake --preset dev >/dev/null
stage "building"
cmake --build --preset dev
stage "testing"
status=0
ctest --preset dev --output-on-failure "$@" || status=$?
stage "end"
exit $status
