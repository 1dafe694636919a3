#!/bin/bash
# The heavy checks, run before work is called done. A summary of one line a check is printed at the end.
# usage: tests/deep.sh [check...]   checks: headers format tidy asan tsan fuzz coverage simulation twins kills
#   FUZZ_S=60    seconds for each fuzz target
#   KILLS=60     kill -9 of the daemon
set -u
cd "$(dirname "$0")/.."
bash .ci/setup deep || exit 3
checks=${*:-headers format asan tsan fuzz coverage simulation twins kills tidy}
log=build/deep; mkdir -p "$log"
summary=""; failed=0
note() { summary="$summary$(printf '%-9s %s' "$1" "$2")"$'\n'; echo "== $1: $2"; }
check() { # NAME COMMAND...: runs it, keeps its output, notes the outcome with its last line
  local name=$1 began now; shift; began=$(date +%s)
  if "$@" >"$log/$name.log" 2>&1; then
    now=$(date +%s); note "$name" "good in $((now - began)) s: $(grep -v '^$' "$log/$name.log" | tail -n 1)"
  else
    now=$(date +%s); failed=1; note "$name" "FAILED after $((now - began)) s, see $log/$name.log: $(grep -v '^$' "$log/$name.log" | tail -n 1)"
  fi
}
sources() { git ls-files 'analysis/*.cpp' 'drivers/*.cpp' 'daemon/*.cpp'; }

headers() { cmake --preset dev && cmake --build --preset headers && echo "every header compiles alone"; }
format() {
  git ls-files '*.h' '*.cpp' | xargs clang-format --dry-run -Werror && echo "every source is formatted"
}
tidy() {
  cmake --preset dev && cmake --build --preset dev || return 1
  sources | xargs -P "$(nproc)" -n 4 clang-tidy -p build/dev --quiet && echo "$(sources | wc -l) files without a finding"
}
asan() {
  cmake --preset asan && cmake --build --preset asan || return 1
  ctest --preset asan -E 'crash_check|coverage' --timeout 900 | tail -n 40
  return "${PIPESTATUS[0]}"
}
tsan() {
  cmake --preset tsan && cmake --build --preset tsan || return 1
  ctest --preset tsan -R '^(drivers|daemon|whole): ' -E 'crash_check|coverage' --timeout 900 | tail -n 40
  return "${PIPESTATUS[0]}"
}
fuzz() {
  cmake --preset fuzz && cmake --build --preset fuzz --target fuzz_targets || return 1
  local target corpus
  for target in build/fuzz/tests/fuzz_*; do
    [ -x "$target" ] && [ -f "$target" ] || continue
    corpus=$(basename "$target"); corpus=${corpus#fuzz_}
    mkdir -p "build/fuzz/corpus/$corpus"
    "$target" -max_total_time="${FUZZ_S:-60}" -timeout=10 "build/fuzz/corpus/$corpus" "tests/fuzz/corpus/$corpus" || return 1
    echo "$corpus: ${FUZZ_S:-60} s without a finding"
  done
}
coverage() { cmake --preset dev && cmake --build --preset dev --target coverage && build/dev/tests/whole/coverage 400 1001; }
simulation() {
  cmake --preset dev && cmake --build --preset dev --target simulation || return 1
  local part
  for part in coverage trouble differences; do build/dev/tests/simulation/simulation "$part" 2000 || return 1; done
  build/dev/tests/simulation/simulation forecast 200
}
twins() { cmake --preset dev && cmake --build --preset dev && /usr/bin/python3 tests/whole/twins.py build/dev/loadstair "$PWD" build/dev/tests/whole/twin; }
kills() {
  cmake --preset dev && cmake --build --preset dev || return 1
  LOADSTAIR_KILLS=${KILLS:-60} LOADSTAIR_SEED=$RANDOM /usr/bin/python3 tests/whole/crash_check.py build/dev/loadstair "$PWD" build/dev/tests/whole/libslow_sync.so
}

for name in $checks; do check "$name" "$name"; done
printf '\nSummary\n%s' "$summary"
exit $failed
