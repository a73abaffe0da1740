// Version 7 UUIDs (RFC 9562 section 5.7): 48 bits of Unix milliseconds, then 74 random bits. Those of one maker rise
// strictly, also within one millisecond and when the clock steps back (section 6.2, method 2: the random part counts
// up). Records bear them; inside the store integers serve. One thread.
#pragma once
#include <array>
#include <cstdint>
#include <functional>
#include <optional>
#include <string>
#include <string_view>

namespace jigwright {

using Uuid = std::array<std::uint8_t, 16>;  ///< most significant byte first

/// "0190163d-8694-739b-aea5-966c26f8ad91": 36 characters, lower case.
std::string text(const Uuid& uuid);
/// The bytes, as the store keeps them.
std::string_view bytes(const Uuid& uuid);
/// nullopt unless there are 16 bytes.
std::optional<Uuid> uuid_from_bytes(std::string_view bytes);

class UuidMaker {
 public:
  using Random = std::function<std::array<std::uint8_t, 10>()>;
  UuidMaker();  ///< libsodium's generator
  explicit UuidMaker(Random random) : random_(std::move(random)) {}

  /// @param unix_ms  milliseconds since 1970 UTC, 0 .. 2^48 - 1; out of range is clamped
  Uuid next(std::int64_t unix_ms);

 private:
  Random random_;
  std::int64_t last_ms_{-1};
  Uuid last_{};
};

}  // namespace jigwright
