#include "db/csv.hpp"

#include <fmt/format.h>

#include <charconv>
#include <optional>

namespace jigwright {
namespace {

unsigned byte(char c) {
  return static_cast<unsigned char>(c);
}
bool continues(char c) {
  return (byte(c) & 0xc0u) == 0x80u;
}

/// Bytes of the character that starts here; 0 where it is not UTF-8 (RFC 3629, section 4).
std::size_t utf8_length(std::string_view text) {
  const unsigned first = byte(text[0]);
  const std::size_t length = first < 0x80u ? 1 : first < 0xc2u ? 0 : first < 0xe0u ? 2 : first < 0xf0u ? 3 : 4;
  if (length == 0 || first > 0xf4u || text.size() < length) return 0;
  for (std::size_t i = 1; i < length; ++i)
    if (!continues(text[i])) return 0;
  const unsigned second = length > 1 ? byte(text[1]) : 0;
  const bool overlong = (first == 0xe0u && second < 0xa0u) || (first == 0xf0u && second < 0x90u);
  const bool outside = (first == 0xedu && second > 0x9fu) || (first == 0xf4u && second > 0x8fu);
  return overlong || outside ? 0 : length;
}

std::optional<std::size_t> first_not_utf8(std::string_view text) {
  for (std::size_t at = 0; at < text.size();) {
    const std::size_t length = utf8_length(text.substr(at));
    if (length == 0) return at;
    at += length;
  }
  return std::nullopt;
}

int characters(std::string_view text) {
  int count = 0;
  for (char c : text) count += continues(c) ? 0 : 1;
  return count;
}

/// Place of a byte, for text that is sound up to there.
SourceRegion place(const std::shared_ptr<const SourceText>& source, std::size_t at) {
  const std::string_view before = std::string_view(source->text).substr(0, at);
  int line = 1;
  for (char c : before) line += c == '\n' ? 1 : 0;
  const std::size_t line_start = before.rfind('\n') + 1;
  return {source, line, characters(before.substr(line_start)) + 1, 1};
}

std::shared_ptr<const SourceText> without_mark(std::shared_ptr<const SourceText> source) {
  if (!source->text.starts_with("\xef\xbb\xbf")) return source;
  return std::make_shared<const SourceText>(SourceText{source->name, source->text.substr(3)});
}

void trim(std::string& text) {
  const std::size_t first = text.find_first_not_of(' ');
  if (first == std::string::npos) return text.clear();
  text.erase(text.find_last_not_of(' ') + 1);
  text.erase(0, first);
}

bool is_number(std::string_view text) {
  if (text.starts_with('+')) text.remove_prefix(1);
  double value = 0;
  const auto [end, fault] = std::from_chars(text.data(), text.data() + text.size(), value);
  return fault == std::errc{} && end == text.data() + text.size();
}

}  // namespace

CsvReader::CsvReader(std::shared_ptr<const SourceText> source, Faults& faults)
    : source_(without_mark(std::move(source))), faults_(faults) {
  const auto bad = first_not_utf8(source_->text);
  if (!bad) return;
  faults_.fault(place(source_, *bad), "this is not UTF-8 text", "save the file as \"CSV UTF-8\"");
  broken_ = true;
}

SourceRegion CsvReader::region(const CsvCell& cell) const {
  return {source_, cell.line, cell.column, std::max(cell.length, 1)};
}

bool CsvReader::next(CsvRow& row) {
  while (!broken_ && !at_end()) {
    if (!read_row(row)) return false;
    for (const CsvCell& cell : row)
      if (!cell.text.empty()) return true;
  }
  return false;
}

bool CsvReader::read_row(CsvRow& row) {
  row.clear();
  for (;;) {
    row.emplace_back();
    read_cell(row.back());
    if (!broken_ && row.size() > most_cells) break_off(row.back(), "this row has too many cells", "check the file");
    if (broken_) return false;
    if (at_end() || at_line_end()) break;
    advance();  // the comma
  }
  skip_line_end();
  return true;
}

void CsvReader::read_cell(CsvCell& cell) {
  while (!at_end() && peek() == ' ') advance();
  cell.line = line_;
  cell.column = column_;
  const std::size_t begin = at_;
  if (!at_end() && peek() == '"') {
    read_quoted(cell);
  } else {
    while (!at_end() && !at_line_end() && peek() != ',' && peek() != '"') advance();
    cell.text = source_->text.substr(begin, at_ - begin);
    if (!at_end() && peek() == '"')
      return break_off({{}, line_, column_, 1}, "a quote stands inside a cell that does not begin with one",
                       "put the whole cell in quotes and double the quotes inside it: \"say \"\"so\"\"\"");
  }
  if (broken_) return;
  trim(cell.text);
  if (cell.length == 0) cell.length = characters(cell.text);
  if (cell.text.size() > longest_cell) return break_off(cell, "this cell is too long", "check its quotes");
  check_controls(cell);
}

void CsvReader::read_quoted(CsvCell& cell) {
  const int line = line_;
  advance();
  for (;;) {
    if (at_end() || cell.text.size() > longest_cell)
      return break_off(cell, "this quote is never closed", "close the cell with another quote");
    const char c = peek();
    advance();
    if (c != '"') {
      cell.text += c;
    } else if (!at_end() && peek() == '"') {
      cell.text += c;
      advance();
    } else {
      break;
    }
  }
  cell.length = line == line_ ? column_ - cell.column : 1;
  while (!at_end() && peek() == ' ') advance();
  if (!at_end() && !at_line_end() && peek() != ',')
    break_off({{}, line_, column_, 1}, "a closing quote is followed by more text",
              "put a comma after the quote, or double a quote that belongs to the text");
}

void CsvReader::check_controls(const CsvCell& cell) {
  for (char c : cell.text) {
    if (byte(c) >= 0x20u && byte(c) != 0x7fu) continue;
    const bool line_break = c == '\n' || c == '\r';
    faults_.fault(region(cell),
                  line_break ? "a line break stands inside this cell"
                             : fmt::format("a control character (code {}) stands in this cell", byte(c)),
                  "remove it");
    return;
  }
}

bool CsvReader::at_line_end() const {
  const std::string_view rest = std::string_view(source_->text).substr(at_, 2);
  return rest[0] == '\n' || rest == "\r\n";
}

void CsvReader::skip_line_end() {
  if (at_end()) return;
  at_ += peek() == '\r' ? 2 : 1;
  ++line_;
  column_ = 1;
}

void CsvReader::advance() {
  const char c = source_->text[at_++];
  if (c == '\n') {
    ++line_;
    column_ = 1;
  } else if (at_end() || !continues(peek())) {
    ++column_;
  }
}

void CsvReader::break_off(const CsvCell& at, std::string what, std::string to_do) {
  faults_.fault(region(at), std::move(what), std::move(to_do));
  broken_ = true;
}

std::string csv_cell(std::string_view text) {
  std::string out(text);
  const bool formula = !out.empty() && std::string_view("=+-@\t\r").find(out[0]) != std::string_view::npos;
  if (formula && !is_number(out)) out.insert(0, 1, '\'');
  const bool outer_space = !out.empty() && (out.front() == ' ' || out.back() == ' ');
  if (!outer_space && out.find_first_of(",\"\r\n") == std::string::npos) return out;
  std::string quoted = "\"";
  for (char c : out) quoted += c == '"' ? std::string("\"\"") : std::string(1, c);
  return quoted + "\"";
}

}  // namespace jigwright
