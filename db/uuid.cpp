#include "db/uuid.hpp"

#include <sodium.h>

#include <algorithm>

namespace jigwright {
namespace {

std::array<std::uint8_t, 10> sodium_random() {
  std::array<std::uint8_t, 10> out{};
  randombytes_buf(out.data(), out.size());
  return out;
}

void put_time(Uuid& uuid, std::int64_t unix_ms) {
  for (std::size_t i = 0; i < 6; ++i) uuid[i] = static_cast<std::uint8_t>(unix_ms >> (40 - 8 * i));
}

void put_version_and_variant(Uuid& uuid) {
  uuid[6] = static_cast<std::uint8_t>((uuid[6] & 0x0f) | 0x70);
  uuid[8] = static_cast<std::uint8_t>((uuid[8] & 0x3f) | 0x80);
}

/// Adds one to the 74 free bits, last byte first; true when they ran over.
bool count_up(Uuid& uuid) {
  for (std::size_t i = 15; i >= 6; --i) {
    const std::uint8_t mask = i == 8 ? 0x3f : i == 6 ? 0x0f : 0xff;
    const auto raised = static_cast<std::uint8_t>((uuid[i] + 1) & mask);
    uuid[i] = static_cast<std::uint8_t>((uuid[i] & ~mask) | raised);
    if (raised != 0) return false;
  }
  return true;
}

}  // namespace

std::string text(const Uuid& uuid) {
  static constexpr char digits[] = "0123456789abcdef";
  std::string out;
  for (std::size_t i = 0; i < uuid.size(); ++i) {
    if (i == 4 || i == 6 || i == 8 || i == 10) out += '-';
    out += digits[uuid[i] >> 4];
    out += digits[uuid[i] & 15];
  }
  return out;
}

std::string_view bytes(const Uuid& uuid) {
  return {reinterpret_cast<const char*>(uuid.data()), uuid.size()};
}

std::optional<Uuid> uuid_from_bytes(std::string_view bytes) {
  Uuid out{};
  if (bytes.size() != out.size()) return std::nullopt;
  std::transform(bytes.begin(), bytes.end(), out.begin(), [](char c) { return static_cast<std::uint8_t>(c); });
  return out;
}

UuidMaker::UuidMaker() : random_(sodium_random) {}

Uuid UuidMaker::next(std::int64_t unix_ms) {
  unix_ms = std::clamp<std::int64_t>(unix_ms, 0, (std::int64_t{1} << 48) - 1);
  if (unix_ms > last_ms_) {
    last_ms_ = unix_ms;
    const auto random = random_();
    std::copy(random.begin(), random.end(), last_.begin() + 6);
  } else if (count_up(last_)) {
    ++last_ms_;
  }
  put_time(last_, last_ms_);
  put_version_and_variant(last_);
  return last_;
}

}  // namespace jigwright
