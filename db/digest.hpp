// SHA-256 (FIPS 180-4, by libsodium) and the one way that records are laid out before they are hashed: each field by
// its length or as eight bytes, low byte first, so that no two different records give the same bytes. Any thread.
#pragma once
#include <cstdint>
#include <optional>
#include <string>
#include <string_view>

namespace jigwright {

/// 32 bytes.
std::string sha256(std::string_view bytes);

/// The same over bytes that come in pieces. digest() ends it.
class Sha256 {
 public:
  Sha256();
  Sha256& add(std::string_view bytes);
  std::string digest();

 private:
  alignas(8) unsigned char state_[128];
};

/// Two lower-case digits a byte.
std::string hex(std::string_view bytes);

class Canonical {
 public:
  Canonical& add(std::string_view text);        ///< length as eight bytes, then the bytes
  Canonical& add(std::int64_t number);          ///< two's complement
  Canonical& add(double number);                ///< IEEE 754 binary64; every NaN alike
  Canonical& add(std::optional<double> maybe);  ///< a presence byte first
  Canonical& mark(char byte) {                  ///< one byte as it is
    bytes_ += byte;
    return *this;
  }
  const std::string& bytes() const { return bytes_; }
  void clear() { bytes_.clear(); }  ///< keeps its memory

 private:
  void eight(std::uint64_t bits);
  std::string bytes_;
};

}  // namespace jigwright
