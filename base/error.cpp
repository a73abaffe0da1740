#include "base/error.hpp"

namespace jigwright {

namespace {

/// Length in bytes of the UTF-8 character that begins the text, and its code point; length 0 when it is none (RFC
/// 3629).
struct Character {
  std::size_t length{0};
  std::uint32_t point{0};
};

Character first_character(std::string_view text) {
  const auto lead = static_cast<unsigned char>(text[0]);
  if (lead < 0x80) return {1, lead};
  const std::size_t length = lead >= 0xf0 ? 4 : lead >= 0xe0 ? 3 : 2;
  if (lead < 0xc2 || lead > 0xf4 || text.size() < length) return {};
  std::uint32_t point = lead & (0xffu >> (length + 1));
  for (std::size_t i = 1; i < length; ++i) {
    const auto byte = static_cast<unsigned char>(text[i]);
    if ((byte & 0xc0u) != 0x80u) return {};
    point = (point << 6) | (byte & 0x3fu);
  }
  constexpr std::uint32_t least[] = {0, 0, 0x80, 0x800, 0x10000};
  if (point < least[length] || point > 0x10ffff || (point >= 0xd800 && point < 0xe000)) return {};
  return {length, point};
}

bool drives_terminal(std::uint32_t point) {
  if (point < 0x20 || (point >= 0x7f && point < 0xa0)) return true;
  if (point == 0x2028 || point == 0x2029 || point == 0x200e || point == 0x200f) return true;
  return (point >= 0x202a && point <= 0x202e) || (point >= 0x2066 && point <= 0x2069);
}

}  // namespace

std::string printable(std::string_view text) {
  std::string out;
  out.reserve(text.size());
  while (!text.empty()) {
    const Character c = first_character(text);
    const std::size_t length = c.length == 0 ? 1 : c.length;
    if (c.length == 0 || drives_terminal(c.point))
      out += '?';
    else
      out += text.substr(0, length);
    text.remove_prefix(length);
  }
  return out;
}

std::string describe(const Error& error) {
  std::string out = error.what;
  if (!error.where.empty()) out += " (" + error.where + ")";
  if (!error.to_do.empty()) out += ": " + error.to_do;
  return printable(out);
}

}  // namespace jigwright
