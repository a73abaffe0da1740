#!/bin/sh
# The whole program from outside: what it prints, what it leaves in the store, how it exits. Takes the program's path.
set -eu
cd "$(dirname "$0")/.."
jigwright=$(cd "$(dirname "$1")" && pwd)/$(basename "$1")
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT
unset JIGWRIGHT_STATION
cd sample-runs
passed=0 failed=0
good() { passed=$((passed + 1)); }
bad() { failed=$((failed + 1)); echo "whole: $*" >&2; }
# expect CODE TEXT WORDS...: the command exits so, and prints (on either stream) a line with that text.
expect() {
  code=$1 text=$2; shift 2
  got=0
  "$jigwright" --store "$work/store.db" "$@" >"$work/out" 2>&1 </dev/null || got=$?
  if [ "$got" != "$code" ]; then bad "$*: exit $got, expected $code"; head -n 5 "$work/out" >&2; return 0; fi
  if ! grep -qF -- "$text" "$work/out"; then bad "$*: no line with \"$text\""; head -n 5 "$work/out" >&2; return 0; fi
  good
}
ask() { sqlite3 "$work/store.db" "$1"; }
same() { if [ "$2" = "$3" ]; then good; else bad "$1: $2, expected $3"; fi; }

expect 0 "240 boards, all new" enter boards.csv reels.csv feeds.csv
expect 0 "Nothing was changed." enter boards.csv reels.csv feeds.csv
expect 1 "NO-GO" try plan-a.toml --order WO-1041
expect 1 "NO-GO" try plan-b.toml --order WO-1041
expect 0 "GO" try plan-b.toml --serial TB3-0001
expect 2 "VOID" try plan-b.toml --serial TB3-0001 --fault probe-open:OUT
expect 2 "lid" try plan-b.toml --serial TB3-0001 --fault lid-open-after=60
expect 4 "probe-open" try plan-b.toml --serial TB3-0001 --fault prob-open:OUT
expect 4 "no board of order" try plan-b.toml --order WO-1014
expect 3 "can't read" try no-such-plan.toml --serial TB3-0001
expect 4 "name --serial" try plan-b.toml
expect 4 "did you mean \"try\"" tray plan-b.toml
expect 4 "control characters" try plan-b.toml --serial "$(printf "TB3\033[31m")"
expect 4 "longer than 64" try plan-b.toml --serial "$(printf "%080d" 1)"
expect 0 "Where the time goes" lint plan-b.toml
expect 0 "under-load/" lint plan-b.toml
expect 0 "Where the time goes" lint --brief plan-b.toml
expect 0 '"settings"' lint --json plan-b.toml
expect 0 "Reel R-7003" trace --reel R-7003
expect 4 'R-7003' trace --reel R-703
expect 0 "U7" trace --serial TB3-0180
expect 0 "NO-GO" show TB3-0180
expect 4 'TB3-0180' show TB3-018
expect 0 "first findings of 240 boards: 240 measured" spread gain gain x100
expect 0 "x100" spread gain gain
expect 0 '"quantiles"' spread under-load load_delta --json
expect 0 "TB3-0001," spread gain gain x100 --all-trials --csv
expect 4 'did you mean "load_delta"' spread under-load load_dleta
expect 0 '"event":"trial_ended"' try plan-b.toml --serial TB3-0003 --json
expect 0 "probe-open:PROBE" faults
# A plan with a question: answered by option, as JSON on standard input, or by nobody.
cp jig.toml limits-a.toml scenario.toml "$work"
{ cat plan-a.toml; printf '\n[[step]]\nid = "lamp"\nkind = "question"\nask = "Is the lamp lit?"\nanswer = "yes"\n'; } >"$work/plan.toml"
expect 0 "GO" try "$work/plan.toml" --serial TB3-0001 --answer lamp=yes
expect 1 "NO-GO" try "$work/plan.toml" --serial TB3-0001 --answer lamp=no
expect 2 "nobody is here to answer" try "$work/plan.toml" --serial TB3-0001
expect 2 "does not answer" try "$work/plan.toml" --serial TB3-0001 --answer lamp=perhaps
got=0; echo '{"answer": true}' | "$jigwright" --store "$work/store.db" try "$work/plan.toml" --serial TB3-0001 --json >"$work/out" 2>&1 || got=$?
same "exit with an answer as JSON" "$got" 0
grep -q '"event":"question"' "$work/out" && good || bad "no event for the question"

# Ctrl-C while the question waits: no answer is needed to end, on either clock.
mkfifo "$work/answers"
for clock in "" --real-time; do
  exec 9<>"$work/answers"
  "$jigwright" --store "$work/store.db" try "$work/plan.toml" --serial TB3-0001 --json $clock <"$work/answers" >"$work/out" 2>&1 &
  pid=$!
  for i in $(seq 60); do grep -q '"event":"question"' "$work/out" && break; sleep 0.2; done
  kill -INT $pid
  for i in $(seq 50); do kill -0 $pid 2>/dev/null || break; sleep 0.1; done
  kill -9 $pid 2>/dev/null && bad "a question outlived Ctrl-C $clock"
  got=0; wait $pid || got=$?
  same "exit after Ctrl-C at a question $clock" "$got" 2
  grep -q "stopped at the station" "$work/out" && good || bad "no reason after Ctrl-C at a question $clock"
  exec 9>&-
done

# A store that can't be written: no board is tried.
got=0; "$jigwright" --store /nonexistent/x.db try plan-b.toml --serial TB3-0001 >"$work/out" 2>&1 </dev/null || got=$?
same "exit for a store that can't be made" "$got" 5

# Every NO-GO under load carries the second-source reel, and the trace lists exactly that reel's serials.
same "serials of R-7003 in the trace" "$("$jigwright" --store "$work/store.db" trace --reel R-7003 --csv | tail -n +2 | cut -d, -f2 | sort | tr -d '\r' | cksum)" \
  "$(awk -F, 'NR > 1 && $1 == "WO-1041" && $2 >= 179 && $2 <= 240 { print $3 }' boards.csv | sort | cksum)"
same "misses under load off R-7003" "$(ask "select count(*) from results_by_reel where step = 'under-load' and verdict = 'missed' and designator = 'U7' and reel <> 'R-7003'")" 0
[ "$(ask "select count(distinct serial) from results where step = 'under-load' and verdict = 'missed'")" -ge 30 ] && good || bad "fewer than 30 boards missed under load"
same "trials open after all that" "$(ask "select count(*) from trial where state = 0")" 0
same "integrity" "$(ask "pragma integrity_check")" ok
same "recorded as simulated only" "$(ask "select count(*) from trial where origin <> 1")" 0

# Whoever reads the output goes away: the trial under way ends safe and on record, and no further board is tried.
before=$(ask "select count(*) from trial")
"$jigwright" --store "$work/store.db" try plan-b.toml --order WO-1041 --json 2>/dev/null </dev/null | head -n 1 >/dev/null
same "trials open after the reader went away" "$(ask "select count(*) from trial where state = 0")" 0
[ "$(ask "select count(*) from trial")" -lt $((before + 200)) ] && good || bad "the order went on without a reader"

# Killed in mid-trial: the open trial shows as VOID.
"$jigwright" --store "$work/store.db" try plan-b.toml --serial TB3-0007 --real-time >/dev/null 2>&1 </dev/null &
pid=$!
for i in 1 2 3 4 5 6 7 8 9 10 11 12 13 14 15 16 17 18 19 20; do
  [ "$(ask "select count(*) from trial where state = 0")" = 1 ] && break
  sleep 0.2
done
kill -9 $pid 2>/dev/null || true
wait $pid 2>/dev/null || true
expect 0 "the program ended in mid-trial" show TB3-0007

# Ctrl-C in mid-trial: VOID with the reason, relays safe, exit code of its own.
"$jigwright" --store "$work/store.db" try plan-b.toml --serial TB3-0008 --real-time >"$work/out" 2>&1 </dev/null &
pid=$!
for i in 1 2 3 4 5 6 7 8 9 10 11 12 13 14 15 16 17 18 19 20; do
  [ "$(ask "select count(*) from trial t join board b on b.id = t.board where b.serial = 'TB3-0008'")" = 1 ] && break
  sleep 0.2
done
sleep 1
kill -INT $pid
got=0; wait $pid || got=$?
same "exit after Ctrl-C" "$got" 2
grep -q "stopped at the station" "$work/out" && good || bad "no reason after Ctrl-C"

# The journal of all that is whole; a value changed behind it is found and named.
expect 0 "whole. Every record is as it was made." audit
expect 0 "agree to the last bit, 0 do not" audit --recompute
expect 0 "boards entered" log --serial TB3-0001
ask "update finding set value = value * 2 where trial = 1 and metric = 1"
expect 5 "trial of TB3-0001" audit

echo "$passed passed, $failed failed"
[ "$failed" = 0 ]
