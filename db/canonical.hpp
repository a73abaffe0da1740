// The one way that records are laid out before they are hashed, kept or sent: each field by its length or as eight
// bytes, low byte first, so that no two different records give the same bytes, and read back from such bytes. Fields
// stand bare or as typed columns; docs/store.md says which. Any thread.
#pragma once
#include <cstdint>
#include <optional>
#include <string>
#include <string_view>

namespace jigwright {

/// The byte before a typed column. Stored; never renumbered.
enum class ColumnType : char { null = 0, integer = 1, real = 2, text = 3, blob = 4 };

class Canonical {
 public:
  Canonical& add(std::string_view text);        ///< length as eight bytes, then the bytes
  Canonical& add(std::int64_t number);          ///< two's complement
  Canonical& add(double number);                ///< IEEE 754 binary64; every NaN alike
  Canonical& add(std::optional<double> maybe);  ///< a presence byte first
  Canonical& small(std::int64_t number);        ///< one byte, 0 .. 254; else a byte 255 and the number
  Canonical& mark(char byte) {                  ///< one byte as it is
    bytes_ += byte;
    return *this;
  }

  /// Typed columns, as a database gives them back: a NaN is NULL there, and -0 is 0.
  Canonical& null() { return mark(static_cast<char>(ColumnType::null)); }
  Canonical& integer(std::int64_t number) { return mark(static_cast<char>(ColumnType::integer)).add(number); }
  Canonical& real(double number);
  Canonical& text(std::string_view text) { return mark(static_cast<char>(ColumnType::text)).add(text); }
  Canonical& blob(std::string_view bytes) { return mark(static_cast<char>(ColumnType::blob)).add(bytes); }
  Canonical& maybe(std::optional<double> number) { return number ? real(*number) : null(); }
  Canonical& unless_empty(std::string_view words) { return words.empty() ? null() : text(words); }

  const std::string& bytes() const { return bytes_; }
  void clear() { bytes_.clear(); }  ///< keeps its memory

 private:
  void eight(std::uint64_t bits);
  std::string bytes_;
};

/// Reads such bytes front to back. What is not there, or of another type, sets failed() and reads as nothing, so that a
/// body is read as straight text and asked once at its end. Views lead into the bytes given.
class CanonicalReader {
 public:
  explicit CanonicalReader(std::string_view bytes) : left_(bytes) {}

  std::string_view text();
  std::int64_t integer();
  std::optional<double> maybe_real();
  std::int64_t small();
  char mark();

  /// The next typed column.
  std::int64_t integer_column();
  std::optional<std::int64_t> maybe_integer_column();
  std::optional<double> maybe_real_column();
  std::string text_column();  ///< empty for NULL
  std::optional<std::string> maybe_text_column();
  std::string blob_column();  ///< empty for NULL

  bool failed() const { return failed_; }
  bool at_end() const { return left_.empty(); }
  void fail() {
    failed_ = true;
    left_ = {};
  }

 private:
  std::uint64_t eight();
  bool is(ColumnType expected);

  std::string_view left_;
  bool failed_{false};
};

}  // namespace jigwright
