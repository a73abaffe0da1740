#include "steps/setting.hpp"

#include <doctest/doctest.h>

#include <limits>

using namespace jigwright;

namespace {

std::vector<Reading> readings(std::initializer_list<double> values, ReadingState state = ReadingState::ok) {
  std::vector<Reading> out;
  for (const double v : values) out.push_back({v, {}, state});
  return out;
}

}  // namespace

TEST_CASE("a fixed rule is done at its count, and not before") {
  CHECK(decide(Fixed{3}, readings({})) == Next::more);
  CHECK(decide(Fixed{3}, readings({1, 2})) == Next::more);
  CHECK(decide(Fixed{3}, readings({1, 2, 3})) == Next::enough);
}

TEST_CASE("a stable rule looks at the last window only") {
  const Stable rule{3, 0.5, 10};
  CHECK(decide(rule, readings({1.0, 1.1})) == Next::more);
  CHECK(decide(rule, readings({9.0, 5.0, 1.0, 1.2})) == Next::more);
  CHECK(decide(rule, readings({9.0, 1.0, 1.2, 1.4})) == Next::enough);
}

TEST_CASE("a spread of exactly the tolerance is stable") {
  CHECK(decide(Stable{2, 0.5, 10}, readings({1.0, 1.5})) == Next::enough);
  CHECK(decide(Stable{2, 0.5, 10}, readings({1.0, 1.5000001})) == Next::more);
}

TEST_CASE("a stable rule gives up at its most readings") {
  CHECK(decide(Stable{2, 0.1, 4}, readings({1, 2, 3})) == Next::more);
  CHECK(decide(Stable{2, 0.1, 4}, readings({1, 2, 3, 4})) == Next::gave_up);
  CHECK(decide(Stable{2, 0.1, 4}, readings({1, 2, 3, 3.05})) == Next::enough);
}

TEST_CASE("an overload ends a setting at once") {
  CHECK(decide(Fixed{10}, readings({1}, ReadingState::overload)) == Next::enough);
  CHECK(decide(Stable{5, 1, 10}, readings({1}, ReadingState::overload)) == Next::enough);
}

TEST_CASE("a reading that no later one mends gives up") {
  for (const ReadingState state : {ReadingState::missing, ReadingState::refused, ReadingState::stale})
    CHECK(decide(Fixed{10}, readings({1}, state)) == Next::gave_up);
  CHECK(decide(Fixed{10}, readings({std::numeric_limits<double>::quiet_NaN()})) == Next::gave_up);
  CHECK(decide(Fixed{1}, readings({std::numeric_limits<double>::infinity()})) == Next::gave_up);
}

TEST_CASE("the most readings of a rule") {
  CHECK(most_readings(Fixed{7}) == 7);
  CHECK(most_readings(Stable{5, 1, 40}) == 40);
}
