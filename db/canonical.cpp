#include "db/canonical.hpp"

#include <bit>
#include <cmath>

namespace jigwright {

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

Canonical& Canonical::small(std::int64_t number) {
  if (number >= 0 && number < 255) return mark(static_cast<char>(number));
  return mark('\xff').add(number);
}

Canonical& Canonical::real(double number) {
  if (std::isnan(number)) return null();
  return mark(static_cast<char>(ColumnType::real)).add(number == 0 ? 0.0 : number);
}

std::uint64_t CanonicalReader::eight() {
  if (left_.size() < 8) {
    fail();
    return 0;
  }
  std::uint64_t bits = 0;
  for (int i = 0; i < 8; ++i)
    bits |= std::uint64_t{static_cast<unsigned char>(left_[static_cast<std::size_t>(i)])} << (8 * i);
  left_.remove_prefix(8);
  return bits;
}

std::string_view CanonicalReader::text() {
  const std::uint64_t length = eight();
  if (length > left_.size()) {
    fail();
    return {};
  }
  const std::string_view out = left_.substr(0, length);
  left_.remove_prefix(length);
  return out;
}

std::int64_t CanonicalReader::integer() {
  return static_cast<std::int64_t>(eight());
}

char CanonicalReader::mark() {
  if (left_.empty()) {
    fail();
    return 0;
  }
  const char out = left_.front();
  left_.remove_prefix(1);
  return out;
}

std::int64_t CanonicalReader::small() {
  const auto first = static_cast<unsigned char>(mark());
  return first < 255 ? first : integer();
}

std::optional<double> CanonicalReader::maybe_real() {
  const char present = mark();
  if (present == 0) return std::nullopt;
  if (present != 1) fail();
  const auto number = std::bit_cast<double>(eight());
  return failed_ ? std::nullopt : std::optional(number);
}

/// NULL, or a column of the type; anything else fails.
bool CanonicalReader::is(ColumnType expected) {
  const auto type = static_cast<ColumnType>(mark());
  if (type != expected && type != ColumnType::null) fail();
  return type == expected && !failed_;
}

std::optional<std::int64_t> CanonicalReader::maybe_integer_column() {
  if (!is(ColumnType::integer)) return std::nullopt;
  const std::int64_t number = integer();
  return failed_ ? std::nullopt : std::optional(number);
}

std::int64_t CanonicalReader::integer_column() {
  const auto number = maybe_integer_column();
  if (!number) fail();
  return number.value_or(0);
}

std::optional<double> CanonicalReader::maybe_real_column() {
  if (!is(ColumnType::real)) return std::nullopt;
  const auto number = std::bit_cast<double>(eight());
  return failed_ ? std::nullopt : std::optional(number);
}

std::optional<std::string> CanonicalReader::maybe_text_column() {
  if (!is(ColumnType::text)) return std::nullopt;
  std::string out(text());
  return failed_ ? std::nullopt : std::optional(std::move(out));
}

std::string CanonicalReader::text_column() {
  return maybe_text_column().value_or(std::string());
}

std::string CanonicalReader::blob_column() {
  return is(ColumnType::blob) ? std::string(text()) : std::string();
}

}  // namespace jigwright
