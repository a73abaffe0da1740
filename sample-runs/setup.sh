# Sourced by first-run.sh and tests/run.sh: installs what is missing, and nothing else.

build_packages="g++ cmake ninja-build ccache pkg-config libboost1.81-dev libtomlplusplus-dev libsqlite3-dev libfmt-dev
  libcli11-dev nlohmann-json3-dev libsodium-dev libzint-dev"

# need_packages NAME ...: Debian packages, by apt-get when one is missing (asks for root through sudo).
need_packages() {
  missing=
  for package in "$@"; do
    dpkg-query -W -f '${Status}' "$package" 2>/dev/null | grep -q 'ok installed' || missing="$missing $package"
  done
  [ -z "$missing" ] && return 0
  as_root=
  if [ "$(id -u)" != 0 ]; then
    as_root=sudo
    command -v sudo >/dev/null || { echo "missing packages:$missing; install them as root (apt-get install$missing)" >&2; return 1; }
  fi
  echo "installing:$missing"
  log=$(mktemp)
  { $as_root apt-get update -q && DEBIAN_FRONTEND=noninteractive $as_root apt-get install -y -q --no-install-recommends $missing; } \
    >"$log" 2>&1 || { tail -n 20 "$log" >&2; rm -f "$log"; return 1; }
  rm -f "$log"
}

# build PRESET [TARGET ...]: quiet unless it fails.
build() {
  preset=$1; shift
  log=$(mktemp)
  { cmake --preset "$preset" && cmake --build --preset "$preset" ${1:+--target "$@"}; } >"$log" 2>&1 ||
    { tail -n 60 "$log" >&2; rm -f "$log"; return 1; }
  rm -f "$log"
}
