#!/bin/sh
# The whole program from outside: what it prints, what it leaves in the store, how it exits. Takes the program's path.
set -eu
cd "$(dirname "$0")/.."
jigwright=$(cd "$(dirname "$1")" && pwd)/$(basename "$1")
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT
unset JIGWRIGHT_STATION
cd sample-runs
passed=0 failed=0 store=$work/store.db
good() { passed=$((passed + 1)); }
bad() { failed=$((failed + 1)); echo "whole: $*" >&2; }
# expect CODE TEXT WORDS...: the command exits so, and prints (on either stream) a line with that text.
expect() {
  code=$1 text=$2; shift 2
  got=0
  "$jigwright" --store "$store" "$@" >"$work/out" 2>&1 </dev/null || got=$?
  if [ "$got" != "$code" ]; then bad "$*: exit $got, expected $code"; head -n 5 "$work/out" >&2; return 0; fi
  if ! grep -qF -- "$text" "$work/out"; then bad "$*: no line with \"$text\""; head -n 5 "$work/out" >&2; return 0; fi
  good
}
ask() { sqlite3 "$store" "$1"; }
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

# The desk, in a store of its own: holds, shipments, reviews, repairs, labels.
store=$work/desk.db
by="--by E.Engineer --reason why"
expect 0 "240 boards, all new" enter boards.csv reels.csv feeds.csv
expect 4 "Board TB3-0179 was never tried." ship TB3-0179 --to "Pier Labs"
expect 0 "62 boards held: TB3-0179, TB3-0180, TB3-0181, TB3-0182 and 58 more" hold --reel R-7003 $by
expect 0 "62 boards by reel R-7003" holds
expect 0 "GO" try plan-b.toml --serial TB3-0179
expect 4 "Board TB3-0179 is held (reel R-7003) by E.Engineer: why." ship TB3-0179 --to "Pier Labs"
expect 4 "shipment can't be done for 1 of 1 board: nothing was recorded" ship TB3-0179 --to "Pier Labs"
expect 0 "1 hold lifted. Judgements stay as they are." release TB3-0179 $by
expect 4 "none of these boards is held" release TB3-0179 $by
expect 0 "1 board shipped to Pier Labs: TB3-0179" ship TB3-0179 --to "Pier Labs"
expect 4 "Board TB3-0179 is on record as shipped to Pier Labs." ship TB3-0179 --to "Pier Labs"
expect 4 "Board TB3-0179 is on record as shipped" scrap TB3-0179 $by
expect 0 "61 holds lifted" release --reel R-7003 $by
expect 0 "No board is held." holds
expect 4 "no board is all of that" hold --reel R-7001 --lot 7K-04 $by
expect 4 "the receiver is missing" ship TB3-0001 --to ""
expect 4 "board TB3-9999 is not known" hold TB3-9999 $by
expect 4 "no board is named" hold $by
expect 4 "a reason is missing" hold TB3-0001 --by E.Engineer --reason " "
expect 1 "NO-GO" try plan-b.toml --serial TB3-0002 --fault rail-low
expect 4 "Board TB3-0002 is NO-GO." ship TB3-0002 --to "Pier Labs"
expect 4 "none of these boards waits for a review" review TB3-0002 $by
expect 0 "GO" try plan-b.toml --serial TB3-0002
expect 4 "an engineer has not reviewed it" ship TB3-0002 --to "Pier Labs"
expect 0 "1 board reviewed, the last GO counts: TB3-0002" review TB3-0002 $by
expect 0 "1 board shipped to Pier Labs: TB3-0002" ship TB3-0002 --to "Pier Labs"
expect 0 "GO" try plan-b.toml --serial TB3-0003
expect 0 "Repair of TB3-0003 is on record: U7 replaced from reel R-7002." repair TB3-0003 --replaced U7 --reel R-7002 --by T.Technician --reason cracked
expect 0 "R-7002" trace --serial TB3-0003
expect 4 "Board TB3-0003 was repaired and not tried since." ship TB3-0003 --to "Pier Labs"
expect 4 "reel R-702 is not known" repair TB3-0003 --replaced U7 --reel R-702 --reason cracked
expect 0 "A scan of NEW-3 now means board TB3-0003." relabel TB3-0003 NEW-3 $by
expect 4 "NEW-3 is a board of its own" relabel TB3-0004 NEW-3 $by
expect 4 "Board TB3-0003 was repaired and not tried since." ship NEW-3 --to "Pier Labs"
expect 0 "1 board scrapped: TB3-0003" scrap NEW-3 $by
expect 4 "Board TB3-0003 is scrapped." ship TB3-0003 --to "Pier Labs"
expect 0 "Reel R-7002 serves U7 of order WO-1041 from place 200 on; before it, R-7003." reel-change U7 R-7002 --from TB3-0200
expect 4 "did you mean TB3-0" reel-change U7 R-7002 --from TB3-020
expect 4 "where the change falls is missing" reel-change U7 R-7002
same "boards with R-7003 after the change" "$(ask "select count(*) from carries where reel = 'R-7003'")" 21

# Revisions: what is adopted is what counts; a trial with other files says so, and ships nothing.
cp plan-b.toml jig.toml limits-b.toml scenario.toml "$work"
expect 0 "No revision was adopted" revisions
expect 4 "what becomes of earlier trials is missing" adopt "$work/plan-b.toml" $by
expect 0 "Revision 1 is in force for every order" adopt "$work/plan-b.toml" --earlier stand $by
expect 4 "these files are in force already, as revision 1" adopt "$work/plan-b.toml" --earlier stand $by
expect 0 "GO" try "$work/plan-b.toml" --serial TB3-0010
expect 0 "adopted as 1" show TB3-0010
echo "# one more line" >>"$work/limits-b.toml"
expect 0 "GO" try "$work/plan-b.toml" --serial TB3-0011
expect 0 "NOT ADOPTED" show TB3-0011
expect 4 "Board TB3-0011 was not tried under a revision that stands for its order." ship TB3-0011 --to "Pier Labs"
expect 0 "Earlier trials no longer count for shipment." adopt "$work/plan-b.toml" --earlier again --second Q.Lead $by
expect 4 "Board TB3-0010 was not tried under a revision that stands for its order." ship TB3-0010 --to "Pier Labs"
expect 0 "1 board shipped to Pier Labs: TB3-0011" ship TB3-0011 --to "Pier Labs"
expect 0 "earlier trials don't count" revisions

# People: once an engineer is registered, an engineer's commands need the password.
echo "tall trees" >"$work/right"; echo "low clouds" >"$work/wrong"; echo "short" >"$work/short"
expect 4 "the password has fewer than 8 characters" register Eve --role engineer --new-password-file "$work/short" --by E.Engineer
expect 4 '"boss" is no role' register Bob --role boss --by E.Engineer
expect 0 "Eve is registered as engineer." register Eve --role engineer --new-password-file "$work/right" --by E.Engineer
expect 4 "the password is wrong" hold TB3-0020 --by Eve --password-file "$work/wrong" --reason why
expect 4 "E.Engineer is not registered as an engineer" hold TB3-0020 $by
expect 4 "nobody is here to type a password" hold TB3-0020 --by Eve --reason why
expect 0 "1 board held: TB3-0020" hold TB3-0020 --by Eve --password-file "$work/right" --reason "a crack"
expect 0 "Ann is registered as operator." register Ann --role operator --badge B-1 --by Eve --password-file "$work/right"
expect 4 "Ann bears this badge" register Bob --role operator --badge B-1 --by Eve --password-file "$work/right"
expect 0 "Ann is registered as gone." deregister Ann --by Eve --password-file "$work/right"
expect 0 "Bob is registered as operator." register Bob --role operator --badge B-1 --by Eve --password-file "$work/right"
expect 0 "badge B-1" people
expect 0 "hold: a crack" log
expect 0 "whole. Every record is as it was made." audit

# The line's code cards: well-formed as far as a plain look goes.
expect 0 "print it on A4" cards "$work/cards.svg"
same "texts on the card sheet" "$(grep -c "</text>" "$work/cards.svg")" 15
same "stray ampersands on the card sheet" "$(sed 's/&[a-z]*;//g' "$work/cards.svg" | grep -c "&")" 0
same "tags opened and not closed on the card sheet" "$(grep -v "/>" "$work/cards.svg" | grep -v "</text>$" | tr '\n' ' ' | sed 's/ *$//')" \
  "$(sed -n '1p' "$work/cards.svg") </svg>"
if command -v xmllint >/dev/null; then xmllint --noout "$work/cards.svg" && good || bad "the card sheet is no XML"; fi

# A shift at the line, its scans from a file: refused, a retest, three in a row, a stop lifted by name and reason, a
# reel change, the end.
store=$work/line.db
test_code=$(grep -o 'XJTEST[^<]*' "$work/cards.svg")
line() {
  got=0
  "$jigwright" --store "$store" line plan-b.toml --order WO-1041 --virtual-time "$@" <"$work/scans" >"$work/out" 2>&1 || got=$?
  same "exit of the line $*" "$got" 0
}
says() { grep -qF -- "$1" "$work/out" && good || { bad "the line does not say \"$1\""; cat "$work/out" >&2; }; }
expect 0 "240 boards, all new" enter boards.csv reels.csv feeds.csv
expect 0 "1 board held: TB3-0005" hold TB3-0005 --by E.Engineer --reason "a crack"
printf '%s\n' "$test_code" Ann XJ02 XJ01 TB3-0001 TB3-0001 TB3-0005 TB3-9999 TB9-1 XJ06 "" >"$work/scans"
line
says "Put the wrist strap on, check it, then scan YES."
says "Ann is logged in."
says "TB3-0001 is GO already. Scan the next board."
says "TB3-0005 is held: a crack. Put it on the hold shelf."
says "TB3-9999 is in no list of order WO-1041. Call the engineer."
says '"TB9-1" is no serial of this product.'
says "Boards tried: 1. GO 1, NO-GO 0, VOID 0, refused scans 4."
printf '%s\n' "$test_code" Ann XJ01 TB3-0002 XJ04 TB3-0002 TB3-0003 TB3-0004 E.Engineer "probe cleaned" R-7002 U7 TB3-0090 XJ06 "watch the probe" >"$work/scans"
line --fault probe-open:OUT
says "Open the lid, reseat the board, and scan it once more."
says "TB3-0002 has had its trials. Put it on the repair shelf."
says "3 boards in a row with the same cause: contact: loop"
says "Only an engineer can do that."
says "Reel R-7002 serves U7 from TB3-0090 on."
says "Hand-over of station bench 1"
says "Boards tried: 3. GO 0, NO-GO 0, VOID 3, refused scans 2."
says "Open: 0 wait for review, 1 held, 2 VOID and not tried again."
says "Order WO-1041: 240 built, 3 tried, 1 GO, 237 not tried yet."
says "For the next shift: watch the probe"
says "Ann is logged out. Hand-over sheet: $store.hand-over-"
cat "$store".hand-over-*.txt | grep -qF "For the next shift: watch the probe" && good || bad "the hand-over sheet is not in its file"
same "the stop and what lifted it" "$(ask "select kind, who, reason from act where kind in ('stop', 'go-on') order by id" | tr '\n' ';')" \
  "stop|Ann|3 boards in a row with the same cause: contact: loop;go-on|E.Engineer|probe cleaned;"
same "reel of TB3-0090 after the change at the line" "$(ask "select reel from carries where serial = 'TB3-0090' and designator = 'U7'")" R-7002
# The scans end without an end of the shift: the last board is still tried and recorded.
printf '%s\n' "$test_code" Ann XJ01 TB3-0006 >"$work/scans"
line
same "trials of the last board scanned" "$(ask "select count(*) from trial t join board b on b.id = t.board where b.serial = 'TB3-0006' and state = 1")" 1
expect 0 "whole. Every record is as it was made." audit
store=$work/store.db

# The journal of all that is whole; a value changed behind it is found and named.
expect 0 "whole. Every record is as it was made." audit
expect 0 "agree to the last bit, 0 do not" audit --recompute
expect 0 "boards entered" log --serial TB3-0001
ask "update finding set value = value * 2 where trial = 1 and metric = 1"
expect 5 "trial of TB3-0001" audit

echo "$passed passed, $failed failed"
[ "$failed" = 0 ]
