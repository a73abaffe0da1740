// What the text forms of answers share: aligned columns, lines of CSV (RFC 4180) and their cells. Pure; any thread.
#pragma once
#include <cstdint>
#include <optional>
#include <string>
#include <vector>

namespace jigwright {

using Cells = std::vector<std::string>;

/// Columns two spaces apart, the header first, indented by two; columns named in `right` end flush. An empty cell
/// shows as "-".
class TextTable {
 public:
  TextTable(Cells header, std::vector<bool> right);
  void add(Cells row);
  std::string text() const;

 private:
  std::string line(const Cells& row, const std::vector<std::size_t>& widths) const;

  std::vector<bool> right_;
  std::vector<Cells> rows_;
};

/// With its line end; cells that a spreadsheet would take for formulas are made safe.
std::string csv_line(const Cells& cells);
/// Shortest digits that read back as the same number; empty for none and for what is not finite.
std::string csv_number(std::optional<double> value);
std::string csv_count(std::optional<std::int64_t> value);

}  // namespace jigwright
