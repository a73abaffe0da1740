#include "db/speaks.hpp"

#include <doctest/doctest.h>

#include <vector>

using namespace jigwright;

namespace {
constexpr PastTrial go{Judgement::go}, no_go{Judgement::no_go}, void_{Judgement::void_},
    reviewed{Judgement::no_go, true};
std::optional<std::size_t> speaks(std::vector<PastTrial> trials) {
  return speaking_trial(trials);
}
}  // namespace

TEST_CASE("the latest trial speaks for its board") {
  CHECK(!speaks({}));
  CHECK(speaks({go}) == 0);
  CHECK(speaks({go, no_go}) == 1);
  CHECK(speaks({void_, go}) == 1);
  CHECK(speaks({go, void_}) == 1);
}

TEST_CASE("a GO after a NO-GO does not count until the NO-GO is reviewed") {
  CHECK(speaks({no_go, go}) == 0);
  CHECK(speaks({no_go, go, go}) == 0);
  CHECK(speaks({reviewed, go}) == 1);
  CHECK(speaks({reviewed, go, no_go, go}) == 2);
}

TEST_CASE("a VOID after a NO-GO speaks, and opens no way to GO") {
  CHECK(speaks({no_go, void_}) == 1);
  CHECK(speaks({no_go, void_, go}) == 1);
}
