#!/bin/sh
# The store's benchmark at its full size: a million boards, or as many as the first word says. Installs what the build
# needs, builds, runs. Prints figures, never a verdict. Its files go to the folder TMPDIR (/tmp without it) and are
# removed at the end.
set -eu
cd "$(dirname "$0")/.."
. sample-runs/setup.sh
boards=${1:-1000000}
case $boards in '' | *[!0-9]*) echo "bench: \"$boards\" is not a number of boards: give one from 3000 up" >&2; exit 4 ;; esac
folder=${TMPDIR:-/tmp}

# A million boards took 3.4 GB and 6 to 13 minutes on two cores: some air is added.
need_MB=$((boards / 200 + 300))
minutes=$((boards / 120000 + 3))
free_MB=$(($(df -Pk "$folder" | awk 'NR == 2 { print $4 }') / 1024))
echo "$boards boards take about $minutes minutes after the build, and $need_MB MB on the disk of $folder ($free_MB MB are free)."
if [ "$free_MB" -lt "$need_MB" ]; then
  echo "bench: that disk is too full: free it, set TMPDIR to a folder on another, or name fewer boards" >&2
  exit 5
fi
need_packages $build_packages
build release benchmark_store
exec build/benchmark_store "$boards" "$folder"
