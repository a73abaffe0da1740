// The code cards of the line: what a scanner sends for YES, NO, ABORT and the rest, and a sheet of them as an SVG page
// with Code 128 symbols (ISO/IEC 15417, by libzint). Their texts hold no character that keyboard layouts move about,
// but for TEST, which is made of those. Any thread.
#pragma once
#include <optional>
#include <string>
#include <vector>

#include "base/error.hpp"
#include "station/texts.hpp"

namespace jigwright {

enum class Card { yes, no, abort, reseat, reel, end, test };

struct CardCode {
  Card card;
  std::string code;      ///< what the scanner sends
  std::string_view key;  ///< of its word in the texts
};
const std::vector<CardCode>& card_codes();

/// The card of a scan; nullopt when it is none.
std::optional<Card> card_of(const std::string& scan);
/// A scan of TEST that came through a wrong keyboard layout.
bool is_garbled_test(const std::string& scan);
std::string test_code();

/// An A4 page, in millimetres. Error kind internal when a symbol can't be made.
Result<std::string> card_sheet(const Texts& texts);

/// The bars of a Code 128 symbol, as widths of bar and space in turn, in modules; quiet zones are not in it.
Result<std::vector<int>> code128(const std::string& text);

}  // namespace jigwright
