// CSV after RFC 4180: commas, quotes doubled inside quotes, CRLF or LF, an optional byte order mark. Every cell knows
// its place, so that a fault points at it. What a cell means is for others. One thread.
#pragma once
#include <cstddef>
#include <memory>
#include <string>
#include <vector>

#include "base/source.hpp"

namespace jigwright {

struct CsvCell {
  std::string text;  ///< without quotes, spaces at its ends cut off
  int line{};
  int column{};  ///< of its first character, the quote counted
  int length{};  ///< in the file, quotes counted; 0 for an empty cell
};

using CsvRow = std::vector<CsvCell>;

class CsvReader {
 public:
  static constexpr std::size_t most_cells = 64;
  static constexpr std::size_t longest_cell = 1000;  ///< bytes

  /// Text that is not UTF-8 is a fault; next() then gives nothing.
  CsvReader(std::shared_ptr<const SourceText> source, Faults& faults);

  /// The next row that has anything in it; false at the end, and after a fault of syntax (a quote out of place, a cell
  /// too long), since what follows can't be trusted. A control character in a cell is a fault, and reading goes on.
  bool next(CsvRow& row);

  /// A fault of syntax ended the reading.
  bool broken() const { return broken_; }
  SourceRegion region(const CsvCell& cell) const;
  const std::shared_ptr<const SourceText>& source() const { return source_; }

 private:
  bool read_row(CsvRow& row);
  void read_cell(CsvCell& cell);
  void read_quoted(CsvCell& cell);
  void check_controls(const CsvCell& cell);
  bool at_end() const { return at_ >= source_->text.size(); }
  bool at_line_end() const;
  void skip_line_end();
  char peek() const { return source_->text[at_]; }
  void advance();
  void break_off(const CsvCell& at, std::string what, std::string to_do);

  std::shared_ptr<const SourceText> source_;
  Faults& faults_;
  std::size_t at_{0};
  int line_{1};
  int column_{1};
  bool broken_{false};
};

/// A cell as RFC 4180 writes it: quoted where it holds a comma, a quote, a line break or outer spaces. A text that a
/// spreadsheet would take for a formula (beginning with = + - @ or a tab, and not a number) gets a ' before it.
std::string csv_cell(std::string_view text);

}  // namespace jigwright
