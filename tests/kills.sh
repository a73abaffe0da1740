#!/bin/sh
# Kills the running program 50 times (kill -9) while it tries boards, and asks the store each time: is every board that
# was shown as recorded there, ended, with the judgement that was shown? Takes the program's path, and how many kills.
set -eu
cd "$(dirname "$0")/.."
jigwright=$(cd "$(dirname "$1")" && pwd)/$(basename "$1")
kills=${2:-50}
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT
unset JIGWRIGHT_STATION
cd sample-runs
passed=0 failed=0
good() { passed=$((passed + 1)); }
bad() { failed=$((failed + 1)); echo "kills: $*" >&2; }
ask() { sqlite3 -cmd ".timeout 5000" "$work/store.db" "$1"; }
now_ms() { echo $(($(date +%s%N) / 1000000)); }

"$jigwright" --store "$work/store.db" enter boards.csv reels.csv feeds.csv >"$work/out"
: >"$work/shown"
slowest_ms=0
kill_no=0
while [ $kill_no -lt "$kills" ]; do
  kill_no=$((kill_no + 1))
  "$jigwright" --store "$work/store.db" try plan-b.toml --order WO-1041 --json >"$work/out" 2>"$work/err" </dev/null &
  pid=$!
  sleep "$(od -An -N2 -tu2 /dev/urandom | awk '{ printf "%.3f", 0.02 + $1 % 380 / 1000 }')"
  kill -9 $pid 2>/dev/null || bad "kill $kill_no: the program had ended by itself: $(head -n 1 "$work/err")"
  wait $pid 2>/dev/null || true

  # A line that the kill cut short was not shown: whole events end with a brace.
  grep '^{"event":"trial_ended".*"recorded":true.*}$' "$work/out" |
    sed 's/.*"serial":"\([^"]*\)","judgement":"\([^"]*\)".*/\1|\2/' >>"$work/shown" || true

  began=$(now_ms)
  "$jigwright" --store "$work/store.db" show TB3-0001 >"$work/out" 2>&1 || bad "kill $kill_no: show: $(head -n 1 "$work/out")"
  took_ms=$(($(now_ms) - began))
  if [ $took_ms -gt $slowest_ms ]; then slowest_ms=$took_ms; fi

  ask "select b.serial || '|' || case t.judgement when 0 then 'GO' when 1 then 'NO-GO' else 'VOID' end
       from trial t join board b on b.id = t.board where t.state = 1" | sort >"$work/held"
  # Lines of the one that the other has not, each counted as often as it stands.
  if sort "$work/shown" | comm -23 - "$work/held" | grep . >"$work/lost"; then
    bad "kill $kill_no: shown as recorded, and not in the store: $(head -n 3 "$work/lost" | tr '\n' ' ')"
  else
    good
  fi
done

same() { if [ "$2" = "$3" ]; then good; else bad "$1: $2, expected $3"; fi; }
shown=$(wc -l <"$work/shown")
held=$(wc -l <"$work/held")
open=$(ask "select count(*) from trial where state = 0")
cut=$(ask "select count(*) from trial where state = 2")
if "$jigwright" --store "$work/store.db" audit >"$work/out" 2>&1; then good; else bad "audit: $(head -n 3 "$work/out")"; fi
same "integrity" "$(ask "pragma integrity_check")" ok
same "findings of trials that never ended" "$(ask "select count(*) from finding where trial in (select id from trial where state <> 1)")" 0
same "ended trials without findings or readings" "$(ask "select count(*) from trial where state = 1 and (id not in (select trial from finding) or id not in (select trial from reading_blob))")" 0
# One trial at most is under way at a kill: open, or ended and not yet shown.
[ $((open + cut + held - shown)) -le "$kills" ] && good || bad "$((open + cut)) trials cut short and $((held - shown)) ended ones not shown, after $kills kills"
[ "$shown" -gt "$kills" ] && good || bad "only $shown boards were shown: the kills came too early to prove anything"
[ $slowest_ms -lt 1000 ] && good || bad "the start after a kill took $slowest_ms ms"

found=$(sort "$work/shown" | comm -12 - "$work/held" | wc -l)
echo "$kills kills: $shown boards shown as recorded, $found of them in the store, $held ended there, $((open + cut)) cut short; the slowest start after a kill took $slowest_ms ms"
echo "$passed passed, $failed failed"
[ "$failed" = 0 ]
