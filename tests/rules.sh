#!/bin/sh
# Rules of the source that a compiler does not check.
set -eu
cd "$(dirname "$0")/.."
bad=0
say() { echo "rules: $*" >&2; bad=1; }

rooms="base fixtures steps limits db sequencer station"
sources=$(find $rooms tests -name '*.cpp' -o -name '*.hpp')

# Formatting.
clang-format --dry-run -Werror $sources 2>/dev/null || say "not formatted: run clang-format -i on what git diff shows"

# g++ 12 crashes at run time on a co_await in a condition.
if grep -nE '(^|[^a-z_])(if|while|switch) *\( *co_await' $sources; then say "bind a co_await to a local before a condition"; fi

# Includes point one way.
may_include() {  # room, rooms that it may include
  room=$1; shift
  for other in $rooms; do
    [ "$other" = "$room" ] && continue
    case " $* " in *" $other "*) continue ;; esac
    if grep -nE "#include \"$other/" $(find "$room" -name '*.cpp' -o -name '*.hpp'); then say "$room may not include $other"; fi
  done
}
may_include base
may_include fixtures base
may_include steps base fixtures
may_include limits base
may_include db base limits
may_include sequencer base fixtures steps limits db
may_include station base fixtures steps limits db sequencer

# toml++, SQLite and JSON stay where they belong.
grep -ln '#include <toml++' $sources | grep -v '^base/toml.cpp$' && say "toml++ belongs into base/toml.cpp"
grep -ln '<sqlite3.h>' $sources | grep -vE '^(db|tests/db)/' && say "SQLite belongs into db/"

exit $bad
