#include "base/nearest.hpp"

#include <doctest/doctest.h>

#include <vector>

using namespace jigwright;

TEST_CASE("a transposed word finds its neighbour") {
  const std::vector<std::string> known{"offset", "gain", "identity"};
  CHECK(nearest("offste", known) == "offset");
  CHECK(nearest("gian", known) == "gain");
}

TEST_CASE("a word like none of them finds nothing") {
  const std::vector<std::string> known{"offset", "gain"};
  CHECK_FALSE(nearest("voltage", known));
}
