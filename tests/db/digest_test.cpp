#include "db/digest.hpp"

#include <doctest/doctest.h>

#include <limits>

#include "db/canonical.hpp"

using namespace jigwright;

TEST_CASE("SHA-256 of the examples published with FIPS 180-4") {
  CHECK(hex(sha256("abc")) == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad");
  CHECK(hex(sha256("abcdbcdecdefdefgefghfghighijhijkijkljklmklmnlmnomnopnopq")) ==
        "248d6a61d20638b8e5c026930c3e6039a33ce45964ff2167f6ecedd419db06c1");
}

TEST_CASE("SHA-256 of nothing and of a million letters, whole and in pieces (FIPS 180-2 appendix B.3)") {
  const std::string million = "cdc76e5c9914fb9281a1c7e284d73e67f1809a48a497200e046d39ccc7112cd0";
  CHECK(hex(sha256("")) == "e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855");
  CHECK(hex(sha256(std::string(1'000'000, 'a'))) == million);
  Sha256 pieces;
  for (int i = 0; i < 1000; ++i) pieces.add(std::string(1000, 'a'));
  CHECK(hex(pieces.digest()) == million);
}

TEST_CASE("fields that join to the same text differ in canonical form") {
  CHECK(Canonical().add("ab").add("c").bytes() != Canonical().add("a").add("bc").bytes());
  CHECK(Canonical().add(std::optional<double>()).bytes() != Canonical().add(std::optional<double>(0.0)).bytes());
}

TEST_CASE("numbers are eight bytes, low byte first, and every NaN is alike") {
  CHECK(Canonical().add(std::int64_t{0x0102}).bytes() == std::string("\x02\x01\0\0\0\0\0\0", 8));
  CHECK(Canonical().add(1.0).bytes() == std::string("\0\0\0\0\0\0\xf0\x3f", 8));
  const double nan = std::numeric_limits<double>::quiet_NaN();
  CHECK(Canonical().add(nan).bytes() == Canonical().add(-nan).bytes());
}
