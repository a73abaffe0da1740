#include "db/digest.hpp"

#include <doctest/doctest.h>

#include <limits>

using namespace jigwright;

namespace {
std::string hex(const std::string& bytes) {
  static constexpr char digits[] = "0123456789abcdef";
  std::string out;
  for (char c : bytes) {
    out += digits[static_cast<unsigned char>(c) >> 4];
    out += digits[static_cast<unsigned char>(c) & 15];
  }
  return out;
}
}  // namespace

TEST_CASE("SHA-256 of the examples published with FIPS 180-4") {
  CHECK(hex(sha256("abc")) == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad");
  CHECK(hex(sha256("abcdbcdecdefdefgefghfghighijhijkijkljklmklmnlmnomnopnopq")) ==
        "248d6a61d20638b8e5c026930c3e6039a33ce45964ff2167f6ecedd419db06c1");
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
