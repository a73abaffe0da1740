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

TEST_CASE("case and spaces matter least") {
  const std::vector<std::string> known{"1 nF", "10 nF", "100 nF"};
  CHECK(nearest("10nF", known) == "10 nF");
  CHECK(nearest("100NF", known) == "100 nF");
}

TEST_CASE("a transposition counts once, a substitution once, an insertion once") {
  CHECK(edit_distance("abc", "abc") == 0);
  CHECK(edit_distance("abc", "acb") == 1);
  CHECK(edit_distance("abc", "abd") == 1);
  CHECK(edit_distance("abc", "abcd") == 1);
  CHECK(edit_distance("", "abc") == 3);
  CHECK(edit_distance("ABC", "abc") == 0);
}

TEST_CASE("nothing is near an empty list, and a list of none says so") {
  CHECK_FALSE(nearest("offset", {}));
  CHECK(listed({}) == "none");
  const std::vector<std::string> two{"a", "b"};
  CHECK(listed(two) == "a, b");
}

TEST_CASE("a word of monstrous length finds nothing, at once") {
  const std::vector<std::string> known{"offset"};
  CHECK_FALSE(nearest(std::string(100000, 'x'), known));
}
