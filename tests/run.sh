#!/bin/sh
# Installs what the tests need, builds, runs every test. A second call is quick.
set -eu
cd "$(dirname "$0")/.."
. sample-runs/setup.sh
began=$(date +%s)
step() { echo "== $* ($(( $(date +%s) - began )) s)"; }

step "packages"
need_packages $build_packages doctest-dev sqlite3 clang-format git

step "rules of the source"
sh tests/rules.sh

step "build with address and undefined-behaviour sanitizers"
build check

step "tests"
# Sanitizer faults end with a code of their own, apart from the program's own exit codes.
export ASAN_OPTIONS=exitcode=99:detect_leaks=1 UBSAN_OPTIONS=exitcode=99:print_stacktrace=1
ctest --test-dir build-check --output-on-failure --timeout 900 -j 2

step "build the program"
build release jigwright benchmark benchmark_store

step "the whole program, as its users call it"
sh tests/whole.sh build/jigwright

step "kills of the running program"
sh tests/kills.sh build/jigwright

step "the drill for the worst day, in short"
sh tests/drill.sh --built 5 50

step "benchmark"
build/benchmark
build/benchmark_store 100000

step "done"
