#!/usr/bin/env bash
# Medians of nine repetitions of every benchmark, in the release build.
set -euo pipefail
cd "$(dirname "${BASH_SOURCE[0]}")/../.."
cmake --preset release -DCOLDPIN_TESTS=ON
cmake --build --preset release --target analyses_benchmark
build/release/tests/benchmarks/analyses_benchmark --benchmark_repetitions=9 --benchmark_report_aggregates_only=true
