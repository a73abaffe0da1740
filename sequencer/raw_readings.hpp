// Raw readings as the bytes that stand with a trial, so that every finding can be worked out again. Format 1, all
// integers LEB128 varints (signed ones zigzag): the number of records; per record the setting's step, its position + 1
// (0 = a known value added by the sequencer), its end (Next), start in ns, the number of readings; per reading its
// state, its time as the difference in ns from the one before (the first from the start), and its value as 8 bytes,
// IEEE 754 little endian. Pure; any thread.
#pragma once
#include <span>
#include <string>
#include <string_view>
#include <vector>

#include "base/error.hpp"
#include "steps/setting.hpp"

namespace jigwright {

constexpr int raw_readings_format = 1;

std::string encode_readings(std::span<const SettingRecord> records, std::span<const Setting> settings);

struct StoredRecord {
  int step{};
  int position{};        ///< -1 = a known value added by the sequencer
  SettingRecord record;  ///< its `setting` is -1: the plan that is read again gives it
};
/// Error kind store when the bytes are cut short or hold what format 1 can't.
Result<std::vector<StoredRecord>> decode_readings(std::string_view bytes);

}  // namespace jigwright
