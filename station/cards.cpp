#include "station/cards.hpp"

#include <fmt/format.h>
#include <zint.h>

#include <memory>

#include "base/source.hpp"

namespace jigwright {
namespace {

constexpr std::string_view test_head = "XJTEST";

struct Freeing {
  void operator()(zint_symbol* symbol) const { ZBarcode_Delete(symbol); }
};

std::string escaped(const std::string& text) {
  std::string out;
  for (const char c : text) {
    if (c == '<')
      out += "&lt;";
    else if (c == '&')
      out += "&amp;";
    else
      out += c;
  }
  return out;
}

/// One card at x, y: frame, symbol, word, and the code in small type for a scanner that is broken.
std::string card_svg(const std::vector<int>& widths, const std::string& word, const std::string& code, double x,
                     double y) {
  constexpr double width = 85, height = 38, module = 0.4;
  std::string out = fmt::format(
      "<rect x=\"{}\" y=\"{}\" width=\"{}\" height=\"{}\" fill=\"none\" stroke=\"#888\" stroke-width=\"0.2\"/>\n", x, y,
      width, height);
  int modules = 0;
  for (const int w : widths) modules += w;
  double at = x + (width - modules * module) / 2;
  for (std::size_t i = 0; i < widths.size(); ++i) {
    if (i % 2 == 0)
      out += fmt::format("<rect x=\"{:.2f}\" y=\"{:.2f}\" width=\"{:.2f}\" height=\"16\"/>\n", at, y + 13,
                         widths[i] * module);
    at += widths[i] * module;
  }
  out += fmt::format("<text x=\"{}\" y=\"{}\" font-size=\"8\" text-anchor=\"middle\">{}</text>\n", x + width / 2,
                     y + 9.5, escaped(word));
  out += fmt::format("<text x=\"{}\" y=\"{}\" font-size=\"3\" text-anchor=\"middle\">{}</text>\n", x + width / 2,
                     y + 34, escaped(code));
  return out;
}

}  // namespace

const std::vector<CardCode>& card_codes() {
  static const std::vector<CardCode> codes = {
      {Card::yes, "XJ01", "card_yes"},       {Card::no, "XJ02", "card_no"},     {Card::abort, "XJ03", "card_abort"},
      {Card::reseat, "XJ04", "card_reseat"}, {Card::reel, "XJ05", "card_reel"}, {Card::end, "XJ06", "card_end"},
      {Card::test, test_code(), "card_test"}};
  return codes;
}

std::string test_code() {
  return std::string(test_head) + "-yzYZ/_+";
}

std::optional<Card> card_of(const std::string& scan) {
  for (const CardCode& c : card_codes())
    if (c.code == scan) return c.card;
  return std::nullopt;
}

bool is_garbled_test(const std::string& scan) {
  return scan.starts_with(test_head) && scan != test_code();
}

Result<std::vector<int>> code128(const std::string& text) {
  const std::unique_ptr<zint_symbol, Freeing> symbol(ZBarcode_Create());
  symbol->symbology = BARCODE_CODE128;
  const int code =
      ZBarcode_Encode(symbol.get(), reinterpret_cast<const unsigned char*>(text.data()), static_cast<int>(text.size()));
  if (code >= ZINT_ERROR || symbol->rows < 1)
    return Error{Error::Kind::internal, std::string("no Code 128 symbol: ") + symbol->errtxt, printable(text), {}};
  std::vector<int> out;
  bool black = true;
  int run = 0;
  for (int i = 0; i < symbol->width; ++i) {
    const bool dark = (symbol->encoded_data[0][i / 8] >> (i % 8) & 1) != 0;
    if (dark != black) {
      out.push_back(run);
      run = 0;
      black = dark;
    }
    ++run;
  }
  out.push_back(run);
  return out;
}

Result<std::string> card_sheet(const Texts& texts) {
  std::string out =
      "<svg xmlns=\"http://www.w3.org/2000/svg\" width=\"210mm\" height=\"297mm\" viewBox=\"0 0 210 297\" "
      "font-family=\"sans-serif\">\n<rect width=\"210\" height=\"297\" fill=\"white\"/>\n";
  out += fmt::format("<text x=\"15\" y=\"18\" font-size=\"5\">{}</text>\n", escaped(texts.say("cards_title")));
  double x = 15, y = 28;
  for (const CardCode& c : card_codes()) {
    const auto widths = code128(c.code);
    if (!widths) return widths.error();
    out += card_svg(widths.value(), texts.say(c.key), c.code, x, y);
    x = x < 50 ? 110 : 15;
    if (x < 50) y += 44;
  }
  return out + "</svg>\n";
}

}  // namespace jigwright
