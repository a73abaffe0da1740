#include "sequencer/raw_readings.hpp"

#include <doctest/doctest.h>

using namespace jigwright;

namespace {

Reading reading(double value, std::int64_t at_ns, ReadingState state = ReadingState::ok) {
  Reading r;
  r.value = value;
  r.at = Duration(at_ns);
  r.state = state;
  return r;
}

}  // namespace

TEST_CASE("readings come back as they were, to the last bit") {
  std::vector<Setting> settings(2);
  settings[0].step = 3;
  settings[0].position = 0;
  settings[1].step = 3;
  settings[1].position = -1;
  std::vector<SettingRecord> records(2);
  records[0] = {
      0, Duration(5'000'000'001), {reading(-1.0 / 3, 5'000'000'077), reading(1e-300, 5'000'000'076)}, Next::enough};
  records[1] = {1, Duration(6'000'000'000), {reading(9.9e37, 6'000'000'000, ReadingState::overload)}, Next::gave_up};
  const auto back = decode_readings(encode_readings(records, settings));
  REQUIRE(back.ok());
  REQUIRE(back.value().size() == 2);
  const StoredRecord& first = back.value()[0];
  CHECK(first.step == 3);
  CHECK(first.position == 0);
  CHECK(first.record.started == Duration(5'000'000'001));
  REQUIRE(first.record.readings.size() == 2);
  CHECK(first.record.readings[0].value == -1.0 / 3);
  CHECK(first.record.readings[1].value == 1e-300);
  CHECK(first.record.readings[1].at == Duration(5'000'000'076));
  CHECK(back.value()[1].position == -1);
  CHECK(back.value()[1].record.readings[0].state == ReadingState::overload);
  CHECK(back.value()[1].record.ended == Next::gave_up);
}

TEST_CASE("bytes cut short anywhere are an error, never a shorter trial") {
  std::vector<Setting> settings(1);
  settings[0].position = 0;
  std::vector<SettingRecord> records{{0, Duration(1), {reading(0.5, 2), reading(0.25, 3)}, Next::enough}};
  const std::string whole = encode_readings(records, settings);
  for (std::size_t n = 0; n < whole.size(); ++n) CHECK_FALSE(decode_readings(whole.substr(0, n)).ok());
  CHECK_FALSE(decode_readings(whole + "x").ok());
}
