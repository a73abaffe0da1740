#include "station/fail.hpp"

#include <fmt/format.h>

#include <chrono>
#include <cstdio>

#include "station/exit_codes.hpp"

namespace jigwright {

int fail(const Error& error) {
  fmt::print(stderr, "jigwright: {}\n", describe(error));
  switch (error.kind) {
    case Error::Kind::file:
      return exit_files;
    case Error::Kind::usage:
      return exit_usage;
    case Error::Kind::store:
      return exit_store;
    case Error::Kind::person:
      return exit_stopped;
    default:
      return exit_fault;
  }
}

void tell(const std::string& notice) {
  if (!notice.empty()) fmt::print(stderr, "jigwright: {}\n", printable(notice));
}

std::int64_t utc_us() {
  using namespace std::chrono;
  return duration_cast<microseconds>(system_clock::now().time_since_epoch()).count();
}

}  // namespace jigwright
