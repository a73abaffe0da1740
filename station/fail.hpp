// What every command shares: an Error on standard error with its exit code, and the stamp of now.
#pragma once
#include <cstdint>

#include "base/error.hpp"

namespace jigwright {

/// "jigwright: what (where): to do" on standard error; the exit code of its kind.
int fail(const Error& error);

/// "jigwright: notice" on standard error; nothing for an empty one.
void tell(const std::string& notice);

/// UTC, microseconds since 1970.
std::int64_t utc_us();

}  // namespace jigwright
