#include "station/tables.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <string_view>

#include "base/error.hpp"
#include "db/csv.hpp"

namespace jigwright {
namespace {

std::size_t width(std::string_view text) {
  return static_cast<std::size_t>(
      std::count_if(text.begin(), text.end(), [](char c) { return (static_cast<unsigned char>(c) & 0xc0u) != 0x80u; }));
}

}  // namespace

TextTable::TextTable(Cells header, std::vector<bool> right) : right_(std::move(right)) {
  add(std::move(header));
}

void TextTable::add(Cells row) {
  for (std::string& cell : row) cell = printable(cell.empty() ? "-" : cell);
  rows_.push_back(std::move(row));
}

std::string TextTable::text() const {
  std::vector<std::size_t> widths(rows_[0].size(), 0);
  for (const Cells& row : rows_)
    for (std::size_t i = 0; i < row.size(); ++i) widths[i] = std::max(widths[i], width(row[i]));
  std::string out;
  for (const Cells& row : rows_) out += line(row, widths);
  return out;
}

std::string TextTable::line(const Cells& row, const std::vector<std::size_t>& widths) const {
  std::string out;
  for (std::size_t i = 0; i < row.size(); ++i) {
    const std::string pad(widths[i] - width(row[i]), ' ');
    out += "  " + (right_[i] ? pad + row[i] : row[i] + pad);
  }
  out.erase(out.find_last_not_of(' ') + 1);
  return out + "\n";
}

std::string csv_line(const Cells& cells) {
  std::string out;
  for (const std::string& cell : cells) out += (&cell == &cells[0] ? "" : ",") + csv_cell(cell);
  return out + "\r\n";
}

std::string csv_number(std::optional<double> value) {
  return value && std::isfinite(*value) ? fmt::format("{}", *value) : "";
}

std::string csv_count(std::optional<std::int64_t> value) {
  return value ? std::to_string(*value) : "";
}

}  // namespace jigwright
