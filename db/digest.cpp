#include "db/digest.hpp"

#include <sodium.h>

namespace jigwright {

std::string sha256(std::string_view bytes) {
  std::string out(crypto_hash_sha256_BYTES, '\0');
  crypto_hash_sha256(reinterpret_cast<unsigned char*>(out.data()), reinterpret_cast<const unsigned char*>(bytes.data()),
                     bytes.size());
  return out;
}

Sha256::Sha256() {
  static_assert(sizeof(crypto_hash_sha256_state) <= sizeof state_ && alignof(crypto_hash_sha256_state) <= 8);
  crypto_hash_sha256_init(reinterpret_cast<crypto_hash_sha256_state*>(state_));
}

Sha256& Sha256::add(std::string_view bytes) {
  crypto_hash_sha256_update(reinterpret_cast<crypto_hash_sha256_state*>(state_),
                            reinterpret_cast<const unsigned char*>(bytes.data()), bytes.size());
  return *this;
}

std::string Sha256::digest() {
  std::string out(crypto_hash_sha256_BYTES, '\0');
  crypto_hash_sha256_final(reinterpret_cast<crypto_hash_sha256_state*>(state_),
                           reinterpret_cast<unsigned char*>(out.data()));
  return out;
}

std::string hex(std::string_view bytes) {
  static constexpr char digits[] = "0123456789abcdef";
  std::string out;
  for (char c : bytes) {
    out += digits[static_cast<unsigned char>(c) >> 4];
    out += digits[static_cast<unsigned char>(c) & 15];
  }
  return out;
}

}  // namespace jigwright
