// SHA-256 (FIPS 180-4), by libsodium. Any thread.
#pragma once
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

}  // namespace jigwright
