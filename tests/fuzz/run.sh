#!/usr/bin/env bash
# Coverage-guided fuzzing of every file reader, with address and undefined-behaviour checks.
#   bash tests/fuzz/run.sh [SECONDS]      default 60; findings are left in build/fuzz/findings
set -euo pipefail
cd "$(dirname "${BASH_SOURCE[0]}")/../.."
cmake --preset fuzz
cmake --build --preset fuzz --target coverage_guided_fuzz
mkdir -p build/fuzz/corpus build/fuzz/findings
number=0
for folder in devices:.toml rigs:.toml recordings:.json; do
  extension=${folder#*:}
  folder=${folder%:*}
  case $folder in devices) key='\000' ;; rigs) key='\001' ;; recordings) key='\002' ;; esac
  for file in profiles/"$folder"/*"$extension" tests/"$folder"/*"$extension"; do
    [ -e "$file" ] || continue
    number=$((number + 1))
    { printf "$key"; cat "$file"; } > build/fuzz/corpus/seed-$number
  done
done
build/fuzz/tests/fuzz/coverage_guided_fuzz -max_total_time="${1:-60}" -timeout=10 -rss_limit_mb=2048 \
  -artifact_prefix=build/fuzz/findings/ build/fuzz/corpus
