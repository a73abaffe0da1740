#include "sequencer/raw_readings.hpp"

#include <doctest/doctest.h>

#include "fake_bench.hpp"

using namespace jigwright;
using jigwright::test::small_jig;

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
  const auto back = decode_readings(encode_readings(records, settings, small_jig()));
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
  const std::string whole = encode_readings(records, settings, small_jig());
  for (std::size_t n = 0; n < whole.size(); ++n) CHECK_FALSE(decode_readings(whole.substr(0, n)).ok());
  CHECK_FALSE(decode_readings(whole + "x").ok());
}

TEST_CASE("whole counts of the meter's resolution take a few bytes, and come back as the same doubles") {
  Jig jig = small_jig();
  jig.meter.voltage[0].resolution = 1e-7;
  std::vector<Setting> settings(1);
  settings[0].position = 4;
  ReadMeter act;
  act.setup.range = 10;
  settings[0].act = act;
  // As the simulated meter makes them (times the resolution), and as a text of decimal digits is read (nearest double).
  for (const bool decimal : {false, true}) {
    CAPTURE(decimal);
    std::vector<SettingRecord> records(1);
    records[0] = {0, Duration(0), {}, Next::enough};
    for (int i = 0; i < 100; ++i) {
      const int count = 1234567 + 37 * i % 11;
      const double value = decimal ? std::stod(std::to_string(count) + "e-7") : count * 1e-7;
      records[0].readings.push_back(reading(value, 20'400'000LL * (i + 1)));
    }
    const std::string bytes = encode_readings(records, settings, jig);
    CHECK(bytes.size() < 260);
    const auto back = decode_readings(bytes);
    REQUIRE(back.ok());
    for (std::size_t i = 0; i < 100; ++i) {
      CHECK(back.value()[0].record.readings[i].value == records[0].readings[i].value);
      CHECK(back.value()[0].record.readings[i].at == records[0].readings[i].at);
    }
  }
}

TEST_CASE("damaged bytes are refused or read as something, and never run on") {
  std::vector<Setting> settings(2);
  settings[0].position = 0;
  settings[1].position = 1;
  std::vector<SettingRecord> records{{0, Duration(1), {reading(0.5, 2), reading(0.25, 3)}, Next::enough},
                                     {1, Duration(9), {reading(-0.0, 12, ReadingState::stale)}, Next::gave_up}};
  const std::string whole = encode_readings(records, settings, small_jig());
  for (std::size_t at = 0; at < whole.size(); ++at)
    for (int bit = 0; bit < 8; ++bit) {
      std::string damaged = whole;
      damaged[at] = static_cast<char>(damaged[at] ^ (1 << bit));
      const auto back = decode_readings(damaged);
      if (back.ok())
        for (const StoredRecord& r : back.value()) CHECK(r.record.readings.size() <= whole.size());
    }
}
