#include "db/digest.hpp"

#include <sodium.h>

#include <bit>
#include <cmath>

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

void Canonical::eight(std::uint64_t bits) {
  char low_first[8];
  for (int i = 0; i < 8; ++i) low_first[i] = static_cast<char>(bits >> (8 * i));
  bytes_.append(low_first, 8);
}

Canonical& Canonical::add(std::string_view text) {
  eight(text.size());
  bytes_ += text;
  return *this;
}
Canonical& Canonical::add(std::int64_t number) {
  eight(static_cast<std::uint64_t>(number));
  return *this;
}
Canonical& Canonical::add(double number) {
  eight(std::isnan(number) ? 0x7ff8000000000000u : std::bit_cast<std::uint64_t>(number));
  return *this;
}
Canonical& Canonical::add(std::optional<double> maybe) {
  bytes_ += maybe ? '\1' : '\0';
  if (maybe) add(*maybe);
  return *this;
}

}  // namespace jigwright
