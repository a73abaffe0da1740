#include "db/uuid.hpp"

#include <doctest/doctest.h>

using namespace jigwright;

namespace {
std::array<std::uint8_t, 10> all_ones() {
  std::array<std::uint8_t, 10> out{};
  out.fill(0xff);
  return out;
}
}  // namespace

TEST_CASE("a UUID carries its milliseconds, version 7 and variant 10: the example of RFC 9562, appendix A.6") {
  // 017F22E2-79B0-7CC3-98C4-DC0C0C07398F is 2022-02-22 14:22:22 -05:00, 0x017F22E279B0 ms, rand_a 0xCC3.
  UuidMaker maker(
      [] { return std::array<std::uint8_t, 10>{0xCC, 0xC3, 0x18, 0xC4, 0xDC, 0x0C, 0x0C, 0x07, 0x39, 0x8F}; });
  CHECK(text(maker.next(0x017F22E279B0)) == "017f22e2-79b0-7cc3-98c4-dc0c0c07398f");
}

TEST_CASE("UUIDs rise strictly, within a millisecond and when the clock steps back") {
  UuidMaker maker;
  Uuid before = maker.next(1'700'000'000'000);
  for (int i = 0; i < 1000; ++i) {
    const Uuid next = maker.next(1'700'000'000'000 + (i % 7) - 3);
    CHECK(before < next);
    CHECK((next[6] >> 4) == 7);
    CHECK((next[8] >> 6) == 2);
    before = next;
  }
}

TEST_CASE("when the random part runs over, the millisecond counts up") {
  UuidMaker maker(all_ones);
  CHECK(text(maker.next(1)) == "00000000-0001-7fff-bfff-ffffffffffff");
  CHECK(text(maker.next(1)) == "00000000-0002-7000-8000-000000000000");
}

TEST_CASE("16 bytes make a UUID, other lengths none") {
  const Uuid uuid = UuidMaker().next(5);
  CHECK(uuid_from_bytes(bytes(uuid)) == uuid);
  CHECK(!uuid_from_bytes("short"));
}
