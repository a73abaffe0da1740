// Raw readings as the bytes that stand with a trial, so that every finding can be worked out again. Format 1; integers
// are LEB128 varints, signed ones zigzag; numbers are 8 bytes, IEEE 754 little endian.
//
//   number of scales, each a number: the resolutions of the meter's ranges that occur
//   number of records; per record
//     step, position + 1 (0 = a known value added by the sequencer)
//     flags: bits 0-1 end (Next), bit 2 every reading is ok, bits 3-4 how values are kept (0 numbers, 1 counts times
//     the
//       scale, 2 counts over the scale's inverse: what gives the very same double back), scale's place where counts
//     start in ns, as the difference from the record before
//     number of readings; per reading
//       state, unless every reading is ok
//       time in ns, as the change of its distance from the reading before (the first from the start)
//       value: a number, or the change in counts
//
// Pure; any thread.
#pragma once
#include <span>
#include <string>
#include <string_view>
#include <vector>

#include "base/error.hpp"
#include "fixtures/jig.hpp"
#include "steps/setting.hpp"

namespace jigwright {

constexpr int raw_readings_format = 1;

/// @param jig  tells the resolution of each range: a reading that is a whole count of it takes a byte or two
std::string encode_readings(std::span<const SettingRecord> records, std::span<const Setting> settings, const Jig& jig);

struct StoredRecord {
  int step{};
  int position{};        ///< -1 = a known value added by the sequencer
  SettingRecord record;  ///< its `setting` is -1: the plan that is read again gives it
};
/// Error kind store when the bytes are cut short or hold what format 1 can't.
Result<std::vector<StoredRecord>> decode_readings(std::string_view bytes);

}  // namespace jigwright
