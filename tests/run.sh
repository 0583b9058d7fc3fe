#!/usr/bin/env bash
# Installs what the tests need, builds with both compilers, checks format and lint, and runs the whole suite. Ends
# with ctest's summary of the suite.
#   bash tests/run.sh             what every change must pass
#   bash tests/run.sh quick       the release suite alone
#   bash tests/run.sh sanitizers  besides: address, undefined-behaviour and data-race builds (a quarter of an hour more)
set -euo pipefail
trap 'echo "tests/run.sh: stopped at line $LINENO: the command above failed" >&2' ERR

root=$(cd "$(dirname "${BASH_SOURCE[0]}")/.." && pwd)
cd "$root"
started=$SECONDS
say() { printf '\n== %s (%d s in)\n' "$1" $((SECONDS - started)); }
sources() { git ls-files 'src/*.cpp' 'src/*.h' 'include/*.h' 'tests/*.cpp' 'tests/*.h'; }

say "packages"
bash docs/install-packages.sh tests

say "release build"
cmake --preset release -DCOLDPIN_TESTS=ON
cmake --build --preset release

if [ "${1:-all}" = all ]; then
  say "format"
  sources | xargs clang-format --dry-run --Werror
  say "the second compiler"
  cmake --preset clang -DCOLDPIN_TESTS=OFF
  cmake --build --preset clang
  say "lint"
  git ls-files 'src/*.cpp' | xargs -P "$(nproc)" -n 4 clang-tidy --quiet -p build/clang
fi

if [ "${1:-all}" = sanitizers ]; then
  say "address and undefined-behaviour checks"
  cmake --preset asan -DCOLDPIN_TESTS=ON
  cmake --build --preset asan
  ctest --preset asan -j "$(nproc)" -LE soundcard
  say "data-race checks"
  cmake --preset tsan -DCOLDPIN_TESTS=ON
  cmake --build --preset tsan --target spectrum_fft_test rig_audio_callback_test rig_session_test
  ctest --preset tsan -j "$(nproc)" -L threads -R 'FftTest|AudioExchange|SessionTest'
fi

say "the whole suite"
ctest --preset release -j "$(nproc)"
