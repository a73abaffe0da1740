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

void Canonical::eight(std::uint64_t bits) {
  for (int i = 0; i < 8; ++i) bytes_ += static_cast<char>(bits >> (8 * i));
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
