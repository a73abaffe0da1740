#!/bin/sh
# A drill for the worst day, on the program itself and in a folder of its own: kills, power cuts, a full disk, a record
# tampered with, a restore. It ends with a report of one page, and exits with 0 only when all counts are equal. Installs
# packages and builds as tests/run.sh does. Takes how many kills (50) and power cuts (1000) there are to be; `--built` in
# front when packages and programs are there. Runs as root or as anybody.
set -eu
cd "$(dirname "$0")/.."
source=$PWD jigwright=$PWD/build/jigwright
unset JIGWRIGHT_STATION

# ---- What the parts below share. Each works in $work; boards shown as recorded gather in $work/shown.

try_order() { "$jigwright" --store "$work/store.db" try plan-b.toml --order WO-1041 --json >"$work/out" 2>"$work/err" </dev/null; }
ask() { sqlite3 -cmd ".timeout 5000" "$work/store.db" "$1"; }
# The exit code; what the command prints goes to $work/out.
exit_of() { got=0; "$@" >"$work/out" 2>&1 || got=$?; echo $got; }
# Whole events that say "recorded": serial|judgement.
note_shown() {
  sed -n '/^{"event":"trial_ended".*"recorded":true.*}$/ s/.*"serial":"\([^"]*\)","judgement":"\([^"]*\)".*/\1|\2/p' "$work/out" >>"$work/shown"
}
# How many of the boards shown stand in the store, each counted as often as it was shown.
held() {
  ask "select b.serial || '|' || case t.judgement when 0 then 'GO' when 1 then 'NO-GO' else 'VOID' end
       from trial t join board b on b.id = t.board where t.state = 1" | sort >"$work/held"
  sort "$work/shown" | comm -12 - "$work/held" | wc -l
}
shown() { wc -l <"$work/shown"; }
say() { echo "$*" >>"$report"; }
# counts WHAT A B: two counts that must be equal.
counts() {
  a=$(echo $2) b=$(echo $3)
  mark=
  [ "$a" = "$b" ] || { mark="  <- differs"; echo "$1: $a and $b" >>"$report.differs"; }
  printf '   %-64s %8s %8s%s\n' "$1" "$a" "$b" "$mark" >>"$report"
}
fresh() { rm -rf "$work"; mkdir "$work"; : >"$work/shown"; }
begin() { cd "$source/sample-runs"; "$jigwright" --store "$work/store.db" enter boards.csv reels.csv feeds.csv >"$work/out"; }

# ---- A disk of 40 MB: called again as `--small-disk WORK REPORT` where this process may mount one.

small_disk() {
  mount -t tmpfs -o size=40m,mode=0777 jigwright-drill "$work" || exit 9
  : >"$work/shown"
  head -c 2500000 /dev/zero >"$work/ballast"
  begin
  got=0 runs=0
  while [ $got -lt 2 ] && [ $runs -lt 20 ]; do
    got=$(exit_of try_order); runs=$((runs + 1))
    note_shown
  done
  counts "exit code once the disk is nearly full: due, and had" 5 $got
  counts "boards told to be NOT recorded, then tried further: due 1, 0" "1 0" \
    "$(grep -c '"recorded":false' "$work/out") $(sed '1,/"recorded":false/d' "$work/out" | grep -c '"event":"trial_began"')"
  counts "says that the disk is full: due, and said" 1 "$(grep -c 'disk is nearly full' "$work/out")"
  counts "boards shown as recorded; in the store" "$(shown)" "$(held)"
  rm "$work/ballast"
  got=$(exit_of "$jigwright" --store "$work/store.db" try plan-b.toml --serial TB3-0001 --json); note_shown
  counts "boards tried once there is room again; in the store" "$(shown)" "$(held)"
  counts "exit code of the audit: due, and had" 0 "$(exit_of "$jigwright" --store "$work/store.db" audit)"
}
if [ "${1-}" = --small-disk ]; then
  work=$2 report=$3
  small_disk
  exit 0
fi

built=
if [ "${1-}" = --built ]; then built=yes; shift; fi
kills=${1:-50} cuts=${2:-1000}
began=$(date +%s)
if [ -z "$built" ]; then
  . sample-runs/setup.sh
  need_packages $build_packages doctest-dev sqlite3
  echo "building"
  build release jigwright
  build check test_db
fi
folder=$(mktemp -d)
trap 'rm -rf "$folder"' EXIT
work=$folder/work report=$folder/report
: >"$report" && : >"$report.differs"
step() { echo "== $* ($(( $(date +%s) - began )) s)"; }

step "kills"
say "1. The program killed $kills times (kill -9) while it tried boards"
line=$(sh tests/kills.sh "$jigwright" "$kills" 2>"$folder/err" | tee "$folder/out" | grep ' kills: ' || true)
cat "$folder/err" >&2
counts "boards shown as recorded; in the store" "$(echo "$line" | sed 's/.* kills: \([0-9]*\) boards.*/\1/')" "$(echo "$line" | sed 's/.* \([0-9]*\) of them in.*/\1/')"
counts "checks of the store afterwards: made, and passed" "$(tail -n 1 "$folder/out" | awk '{ print $1 + $3 }')" "$(tail -n 1 "$folder/out" | awk '{ print $1 }')"

step "power cuts"
cd "$source"
code=0
(cd "$folder" && JIGWRIGHT_POWER_CUTS=$cuts "$source/build-check/tests/test_db" --test-case='after a power cut at any operation*') \
  >"$folder/out" 2>&1 || code=$?
[ $code = 0 ] || tail -n 20 "$folder/out" >&2
set -- $(sed -n 's/.* \([0-9]*\) power cuts, \([0-9]*\) ended trials, \([0-9]*\) lost.*/\1 \2 \3/p' "$folder/out") 0 0 0
say "2. The power cut at $cuts moments, on a disk that forgets what was not synced"
counts "cuts: due, and made" "$cuts" "$1"
counts "trials that the store took; whole afterwards" "$2" "$(($2 - $3))"
counts "exit code of the test: due, and had" 0 $code

step "full disk"
say "3. A full disk"
fresh
small=no
for how in "unshare -m" "unshare -rm"; do
  [ $small = no ] || break
  $how true 2>/dev/null || continue
  code=0
  $how sh "$source/tests/drill.sh" --small-disk "$work" "$report" 2>"$folder/err" || code=$?
  [ "$code" = 9 ] || small=yes
  [ "$code" = 0 ] || [ "$code" = 9 ] || { cat "$folder/err" >&2; counts "exit code of the part with the small disk" 0 "$code"; }
done
[ $small = yes ] || say "   (A disk of 40 MB can't be had here: this half is left out. A quota follows.)"
fresh
begin
# A file may grow to 2 MB: strikes in mid-trial, as a quota does. Units of 512 bytes.
{
  ulimit -f 4096
  got=0
  "$jigwright" --store "$work/store.db" try plan-b.toml --order WO-1041 --json 2>&1 </dev/null || got=$?
  echo $got
} | cat >"$work/out"
note_shown
counts "exit code at a quota that strikes in mid-trial: due, and had" 5 "$(tail -n 1 "$work/out")"
counts "boards told to be NOT recorded, then tried further: due 1, 0" "1 0" \
  "$(grep -c '"recorded":false' "$work/out") $(sed '1,/"recorded":false/d' "$work/out" | grep -c '"event":"trial_began"')"
counts "boards shown as recorded; in the store" "$(shown)" "$(held)"
got=$(exit_of try_order); note_shown
counts "boards shown once the quota is gone; in the store" "$(shown)" "$(held)"
counts "boards tried then: due, and shown" 240 "$(grep -c '"recorded":true' "$work/out")"
counts "exit code of the audit: due, and had" 0 "$(exit_of "$jigwright" --store "$work/store.db" audit)"

step "tampering"
say "4. A record that was tampered with"
fresh
begin
got=$(exit_of try_order)
ask "pragma wal_checkpoint(truncate)" >/dev/null
cp "$work/store.db" "$work/sound.db"
audit_names() {  # TEXT: exit code 5, and a line with the text
  code=$(exit_of "$jigwright" --store "$work/store.db" audit)
  if [ "$code" = 5 ] && grep -qF "$1" "$work/out"; then echo 1; else echo 0; fi
}
refused() {  # how many of two trials are refused
  n=0
  for serial in TB3-0001 TB3-0002; do
    code=$(exit_of "$jigwright" --store "$work/store.db" try plan-b.toml --serial $serial)
    [ "$code" = 5 ] && grep -q "the store is damaged" "$work/out" && n=$((n + 1))
  done
  echo $n
}
trial=$(ask "select max(id) from trial") serial=$(ask "select b.serial from trial t join board b on b.id = t.board order by t.id desc limit 1")
ask "update finding set value = value * 0.9 where trial = $trial and metric = (select max(metric) from finding where trial = $trial and value <> 0)"
counts "value changed by the sqlite3 shell; named by the audit" 1 "$(audit_names "trial of $serial ")"
counts "trials asked for behind it; refused" 2 "$(refused)"
cp "$work/sound.db" "$work/store.db"
ask "update trial set judgement = 0 where id = (select id from trial where judgement = 1 order by id limit 1)"
serial=$(ask "select b.serial from trial t join board b on b.id = t.board where t.judgement = 0 and t.nogo > 0 limit 1")
counts "NO-GO made GO; named by the audit" 1 "$(audit_names "trial of $serial ")"
cp "$work/sound.db" "$work/store.db"
at=$(grep -abo "TB3-0123" "$work/store.db" | head -n 1 | cut -d: -f1)
printf 9 | dd of="$work/store.db" bs=1 seek=$((at + 6)) conv=notrunc 2>/dev/null
counts "byte changed in the file; named by the audit" 1 "$(audit_names "TB3-01")"

step "restore"
say "5. A store that was overwritten in its middle, restored"
fresh
cp plan-b.toml limits-b.toml jig.toml scenario.toml "$work"
printf '[station]\nname = "bench 1"\nstore = "store.db"\nplan = "plan-b.toml"\n\n[backups]\nfolder = "backups"\nevery = "24 h"\n' >"$work/station.toml"
on_station() { "$jigwright" --station "$work/station.toml" "$@" </dev/null; }
try_on_station() { on_station try plan-b.toml --order WO-1041 --json >"$work/out" 2>"$work/err"; }
overwrite() {
  pages=$(($(stat -c %s "$work/store.db") / 4096))
  dd if=/dev/urandom of="$work/store.db" bs=4096 seek=$((pages / 4)) count=$((pages / 2)) conv=notrunc 2>/dev/null
}
on_station enter boards.csv reels.csv feeds.csv >"$work/out"
got=$(exit_of try_on_station); note_shown
counts "backups by the schedule: due, and made" 1 "$(ls "$work/backups" | grep -c '\.db$')"
got=$(exit_of try_on_station); note_shown
counts "exit code of a backup by command: due, and had" 0 "$(exit_of on_station backup)"
got=$(exit_of try_on_station); note_shown
overwrite
counts "exit code of the restore: due, and had" 0 "$(exit_of on_station restore --operator Drill)"
[ -s "$work/store.db" ] || cat "$work/out" >&2
counts "boards shown as recorded; in the restored store" "$(shown)" "$(held)"
counts "places of boards entered; in the restored store" 240 "$(ask "select count(*) from build")"
got=$(exit_of try_on_station); note_shown
counts "boards shown in the new epoch as well; in the store" "$(shown)" "$(held)"
counts "epochs: due, and begun" 2 "$(ask "select max(epoch) from journal")"
counts "exit code of the audit: due, and had" 0 "$(exit_of on_station audit)"

say "6. A copy file cut short, and the store damaged again"
records=$(ask "select count(*) from journal")
copies=$(ls "$work"/backups/*.records | tail -n 1)
truncate -s -100000 "$copies"
ask "update finding set value = 1 where trial = 1 and metric = (select min(metric) from finding where trial = 1)"
counts "exit code of the restore: due, and had" 5 "$(exit_of on_station restore --operator Drill)"
told=$(sed -n 's/^LOST: \([0-9]*\) record.*/\1/p' "$work/out")
counts "records lost: counted by the drill, and told" "$((records - $(ask "select count(*) from journal") + 1))" "${told:-none}"
counts "boards shown; in the store, or told to be lost" "$(shown)" "$(($(held) + ${told:-0}))"
counts "exit code of the audit: due, and had" 0 "$(exit_of on_station audit)"
got=$(exit_of on_station try plan-b.toml --serial TB3-0001)
counts "a board tried afterwards: exit code due, and had" 0 "$got"

step "report"
printf '\n%s\n%s\n\n' "THE WORST DAY, $(date -u +%Y-%m-%dT%H:%MZ)" \
  "On the left what was shown, due or done; on the right what was found, had or told."
cat "$report"
echo
if [ -s "$report.differs" ]; then
  echo "These differ:"
  sed 's/^/  /' "$report.differs"
  exit 1
fi
echo "All counts are equal."
