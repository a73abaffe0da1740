// Whether the disk will take a record, asked before a relay moves: may the store's file be written at all, and is there
// room for a trial. No SQL here. Any thread.
#pragma once
#include <cstdint>
#include <optional>
#include <string>

#include "base/error.hpp"

namespace jigwright {

/// What must be left on the store's disk before a trial begins. A trial takes about 0.1 MB of the write-ahead log,
/// which grows to 4 MB (a thousand pages) before it is copied into the store, so 8 MB would do; this is four times
/// that.
inline constexpr std::uint64_t space_for_trial_bytes = 32u << 20;

/// Bytes that this user may still write on the disk of this file; nullopt when that can't be told (":memory:", say).
std::optional<std::uint64_t> space_left_bytes(const std::string& path);

/// Error kind store when less than space_for_trial_bytes is left. What can't be told is no error: the write itself will
/// tell.
Result<Done> check_space(const std::string& path, std::optional<std::uint64_t> left_bytes);
inline Result<Done> check_space(const std::string& path) {
  return check_space(path, space_left_bytes(path));
}

/// Error kind store when the store's file, the files that SQLite keeps beside it, or their folder can't be written by
/// this user, or the folder is missing: SQLite would open such a store for reading only, and fail at the first record.
Result<Done> check_writable(const std::string& path);

}  // namespace jigwright
