#!/bin/sh
# A shift of many boards at the line, on virtual time: boards a second and peak memory at two lengths, which should be
# alike. Figures, never a verdict. Takes the program's path, and the two numbers of boards.
set -eu
cd "$(dirname "$0")/.."
jigwright=$(cd "$(dirname "$1")" && pwd)/$(basename "$1")
few=${2:-1000} many=${3:-5000}
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT
unset JIGWRIGHT_STATION
cp sample-runs/jig.toml sample-runs/limits-b.toml sample-runs/station.toml "$work"
# The sample's plan and truth with an order of its own, one digit longer. Its boards have no reel of the scenario: each
# is drawn from the parts' own spread.
sed 's/^pattern = .*/pattern = "TB5-#####"/' sample-runs/plan-b.toml >"$work/plan.toml"
cp sample-runs/scenario.toml "$work/scenario.toml"
cd "$work"
"$jigwright" cards cards.svg >/dev/null
test_code=$(grep -o 'XJTEST[^<]*' cards.svg)
for boards in "$few" "$many"; do
  awk -v n="$boards" 'BEGIN { print "order,build_no,serial,panel,product"
    for (i = 1; i <= n; ++i) printf "WO-5,%d,TB5-%05d,,three-range bridge amplifier\n", i, i }' >"boards-$boards.csv"
  { printf '%s\nAnn\nXJ01\n' "$test_code"
    awk -v n="$boards" 'BEGIN { for (i = 1; i <= n; ++i) printf "TB5-%05d\n", i }'
    printf 'XJ06\n\n'; } >"scans-$boards"
  "$jigwright" --store "line-$boards.db" enter "boards-$boards.csv" >/dev/null
  began=$(date +%s%N)
  "$jigwright" --store "line-$boards.db" line plan.toml --order WO-5 --virtual-time <"scans-$boards" >"out-$boards" 2>&1 &
  pid=$! peak=0 ticks=1
  while kill -0 $pid 2>/dev/null; do
    now=$(awk '/VmHWM/ { print $2 }' /proc/$pid/status 2>/dev/null || true)
    [ -n "$now" ] && peak=$now
    now=$(awk '{ print $14 + $15 }' /proc/$pid/stat 2>/dev/null || true)
    [ "${now:-0}" -gt 0 ] && ticks=$now
    sleep 0.2
  done
  wait $pid
  took_ms=$(($(date +%s%N) / 1000000 - began / 1000000))
  tried=$(sed -n 's/^Boards tried: \([0-9]*\).*/\1/p' "out-$boards" | head -n 1)
  size=$(($(wc -c <"line-$boards.db") / 1024 / ${tried:-1}))
  echo "$boards boards scanned, ${tried:-0} tried in $((took_ms / 1000)) s: $((${tried:-0} * 1000 / took_ms)) boards a second ($((${tried:-0} * $(getconf CLK_TCK) / ticks)) a second of processor time), peak memory $((peak / 1024)) MiB, $size KiB of store a board"
  grep "^Boards tried" "out-$boards" | head -n 1
done
