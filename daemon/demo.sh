#!/bin/bash
# The main job in one command: installs what is missing, builds the program, rehearses a load-step run on a simulated
# bench. Arguments go on to `loadstair demo` (try --help).
set -eu
here=$(cd "$(dirname "$0")/.." && pwd)
bash "$here/.ci/setup"
(
  cd "$here"
  cmake --preset release >/dev/null
  cmake --build --preset release
)
exec "$here/build/release/loadstair" demo "$@"
