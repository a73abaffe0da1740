#include "base/error.hpp"

namespace jigwright {

std::string printable(std::string_view text) {
  std::string out(text);
  for (char& c : out) {
    const auto byte = static_cast<unsigned char>(c);
    if (byte < 0x20 || byte == 0x7f) c = '?';
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
