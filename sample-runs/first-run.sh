#!/bin/sh
# Installs what the build needs, builds, and plays the sample's whole story on the simulated jig.
set -eu
cd "$(dirname "$0")/.."
. sample-runs/setup.sh
need_packages $build_packages
echo "building ..."
build release jigwright

jigwright=$PWD/build/jigwright
work=$PWD/build/first-run
rm -rf "$work"
mkdir -p "$work"
export JIGWRIGHT_STATION="$PWD/sample-runs/station.toml"
cd sample-runs

# run WORDS...: shows the command as a user types it, and its output.
run() { echo "\$ jigwright $*"; "$jigwright" --store "$work/results.db" "$@" >"$work/out" 2>&1 || true; }
some() { sed -n "$1" "$work/out"; }

cat <<'TEXT'

JIGWRIGHT, FIRST RUN            every board here is simulated, every name and number invented

A line has built 240 bridge amplifiers, order WO-1041. What was built from which reel comes from
the assembler as three lists.

TEXT
run enter boards.csv reels.csv feeds.csv
some p
cat <<'TEXT'

1. Plan A is what the old jig did: offset with the input shorted, and the gain of each range.

TEXT
run try plan-a.toml --order WO-1041
some '/NO-GO  /{p;n;p;}'
some '$p'
cat <<'TEXT'

A few boards miss their gain; all the others ship. Then customers report millivolts of offset,
with some cables and some meters, and not with others.

2. Plan B adds what the field has and the jig did not: capacitance on the output, eight loads,
   each proved to reach the board's own pad before power comes.

TEXT
run try plan-b.toml --order WO-1041
some '/NO-GO  .*under-load/{p;n;p;}' | head -n 8
echo "  ..."
some '$p'
cat <<'TEXT'

The same boards, and now dozens are NO-GO. (VOID would say nothing of the board: nothing was
missed, but jig, data or person left the trial in doubt, and the board must be tried again.)

3. What do they have in common? Ask which reels one of them carries ...

TEXT
run trace --serial TB3-0180
some p
cat <<'TEXT'

... and which serials carry that output amplifier's reel. These are the boards to get back:

TEXT
run trace --reel R-7003
some '1,6p'
echo "  ..."
some '$p'
echo
echo "Its neighbours at the same place, R-7001 and R-7002:"
run trace --reel R-7001
some '$p'
run trace --reel R-7002
some '$p'
cat <<'TEXT'

4. Each finding is on record, the least room first:

TEXT
run show TB3-0180
some '1,14p'
echo "  ..."
cat <<TEXT

The records are in build/first-run/results.db; sqlite3 opens it, and its views "results" and
"results_by_reel" hold a row a finding. Next, in the folder sample-runs:

  ../build/jigwright lint plan-b.toml                       what the plan does, and where its time goes
  ../build/jigwright try plan-b.toml --serial TB3-0200      one board, finding by finding
  ../build/jigwright try plan-b.toml --serial TB3-0200 --fault probe-open:OUT
TEXT
