#include "db/lists.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <charconv>
#include <span>

#include "base/nearest.hpp"
#include "db/csv.hpp"

namespace jigwright {
namespace {

struct Column {
  std::string_view name;
  bool needed;  // the column
  bool filled;  // every cell of it
};
constexpr std::array board_columns{Column{"order", true, true}, Column{"build_no", true, true},
                                   Column{"serial", true, true}, Column{"panel", true, false},
                                   Column{"product", true, false}};
constexpr std::array reel_columns{
    Column{"reel", true, true},      Column{"maker", true, true},      Column{"part", true, true},
    Column{"lot", true, true},       Column{"date_code", true, false}, Column{"distributor", true, false},
    Column{"rereeled", true, false}, Column{"quantity", true, false},  Column{"marking", true, false}};
constexpr std::array feed_columns{Column{"order", true, true},        Column{"designator", true, true},
                                  Column{"reel", true, true},         Column{"from", true, false},
                                  Column{"to", true, false},          Column{"possible_from", false, false},
                                  Column{"possible_to", false, false}};

struct Form {
  ListKind kind;
  std::string_view name;
  std::span<const Column> columns;
};
constexpr std::array forms{Form{ListKind::boards, "boards", board_columns},
                           Form{ListKind::reels, "reels", reel_columns}, Form{ListKind::feeds, "feeds", feed_columns}};

std::vector<std::string> names(const Form& form) {
  std::vector<std::string> out;
  for (const Column& c : form.columns) out.emplace_back(c.name);
  return out;
}

std::string lower(std::string text) {
  for (char& c : text) c = static_cast<char>(c >= 'A' && c <= 'Z' ? c + 32 : c);
  return text;
}

std::optional<std::size_t> column_named(const Form& form, const std::string& name) {
  for (std::size_t i = 0; i < form.columns.size(); ++i)
    if (form.columns[i].name == name) return i;
  return std::nullopt;
}

/// Two for a column's name, one for nearly so; columns that the form lacks count against it.
int likeness(const Form& form, const CsvRow& header) {
  const auto known = names(form);
  int score = 0;
  for (const CsvCell& cell : header) {
    if (column_named(form, lower(cell.text)))
      score += 3;
    else if (nearest(cell.text, known))
      score += 1;
    else
      score -= 1;
  }
  return score;
}

const Form* form_of(const CsvRow& header) {
  const auto best = std::max_element(forms.begin(), forms.end(), [&](const Form& a, const Form& b) {
    return likeness(a, header) < likeness(b, header);
  });
  return likeness(*best, header) >= 3 ? &*best : nullptr;
}

/// For each cell of a row the column it belongs to.
struct Header {
  const Form* form{};
  std::vector<std::optional<std::size_t>> column;
  bool sound{true};
};

class HeaderReader {
 public:
  HeaderReader(const CsvReader& csv, Faults& faults) : csv_(csv), faults_(faults) {}

  Header read(const CsvRow& row) {
    header_.form = form_of(row);
    if (header_.form == nullptr) return unknown_form(row);
    for (const CsvCell& cell : row) take(cell);
    for (std::size_t i = 0; i < header_.form->columns.size(); ++i) need(i, row);
    return header_;
  }

 private:
  Header unknown_form(const CsvRow& row) {
    header_.sound = false;
    for (char other : {';', '\t'})
      if (row.size() == 1 && row[0].text.find(other) != std::string::npos) {
        faults_.fault(csv_.region(row[0]), fmt::format("the columns are parted by {}", other == ';' ? "\";\"" : "tabs"),
                      "save the file with commas between its columns");
        return header_;
      }
    std::string to_do = "the first line names the columns";
    for (const Form& form : forms) to_do += fmt::format("; {}: {}", form.name, listed(names(form)));
    SourceRegion whole = csv_.region(row.front());
    whole.length = std::max(1, row.back().column + row.back().length - row.front().column);
    faults_.fault(whole, "this is not the header of a list of boards, reels or feeds", to_do);
    return header_;
  }

  void take(const CsvCell& cell) {
    const Form& form = *header_.form;
    const auto at = column_named(form, lower(cell.text));
    if (!at) {
      const auto known = names(form);
      const auto near = nearest(cell.text, known);
      misspelt_.push_back(near.value_or(""));
      fault(cell, fmt::format("unknown column \"{}\"", cell.text),
            fmt::format("a list of {} has: {}", form.name, listed(known)) +
                (near ? fmt::format("; write \"{}\"", *near) : ""));
    } else if (std::find(header_.column.begin(), header_.column.end(), at) != header_.column.end()) {
      fault(cell, fmt::format("the column \"{}\" stands here twice", cell.text), "leave one of them out");
    }
    header_.column.push_back(at);
  }

  void need(std::size_t at, const CsvRow& row) {
    const Column& column = header_.form->columns[at];
    if (!column.needed) return;
    if (std::find(header_.column.begin(), header_.column.end(), std::optional(at)) != header_.column.end()) return;
    if (std::find(misspelt_.begin(), misspelt_.end(), column.name) != misspelt_.end()) return;  // named already
    fault(row.back(), fmt::format("the column \"{}\" is missing", column.name),
          fmt::format("a list of {} has: {}", header_.form->name, listed(names(*header_.form))) +
              (column.filled ? "" : "; its cells may be empty"));
  }

  void fault(const CsvCell& cell, std::string what, std::string to_do) {
    header_.sound = false;
    faults_.fault(csv_.region(cell), std::move(what), std::move(to_do));
  }

  const CsvReader& csv_;
  Faults& faults_;
  Header header_;
  std::vector<std::string> misspelt_;
};

/// One row's cells by their column, and the checks that a single cell allows.
class Row {
 public:
  Row(const CsvReader& csv, const Header& header, const CsvRow& cells, Faults& faults)
      : header_(header), faults_(faults), cells_(header.form->columns.size()) {
    shaped_ = right_length(csv, cells);
    sound_ = shaped_;
    for (std::size_t i = 0; i < std::min(cells.size(), header.column.size()); ++i)
      if (header.column[i]) cells_[*header.column[i]] = {cells[i].text, csv.region(cells[i])};
    if (!sound_) return;
    for (std::size_t i = 0; i < cells_.size(); ++i)
      if (header.form->columns[i].filled && cells_[i].text.empty()) empty(i);
  }

  /// As many cells as the header has: else no cell can be told to be what its column says.
  bool shaped() const { return shaped_; }
  bool sound() const { return sound_; }
  const ListCell& cell(std::string_view name) const { return cells_[*column_named(*header_.form, std::string(name))]; }

  std::optional<std::int64_t> number(std::string_view name) {
    const ListCell& c = cell(name);
    if (c.text.empty()) return std::nullopt;
    std::int64_t value = 0;
    const char* end = c.text.data() + c.text.size();
    const auto [stop, error] = std::from_chars(c.text.data(), end, value);
    if (error == std::errc{} && stop == end && value >= 1 && value <= most_number) return value;
    fault(c, fmt::format("{}: \"{}\" is not a whole number from 1 to {}", name, c.text, most_number), {});
    return std::nullopt;
  }

  std::optional<bool> yes_no(std::string_view name) {
    const ListCell& c = cell(name);
    if (c.text.empty()) return std::nullopt;
    if (lower(c.text) == "yes") return true;
    if (lower(c.text) == "no") return false;
    fault(c, fmt::format("{}: expected yes or no, found \"{}\"", name, c.text), "leave it empty where it is not known");
    return std::nullopt;
  }

  void fault(const ListCell& at, std::string what, std::string to_do) {
    sound_ = false;
    faults_.fault(at.region, std::move(what), std::move(to_do));
  }

 private:
  static constexpr std::int64_t most_number = 2'147'483'647;

  bool right_length(const CsvReader& csv, const CsvRow& cells) {
    const std::size_t due = header_.column.size();
    if (cells.size() == due) return true;
    const CsvCell& at = cells.size() > due ? cells[due] : cells.back();
    faults_.fault(
        csv.region(at), fmt::format("this row has {} cells, and the header has {}", cells.size(), due),
        cells.size() > due ? "put a cell that holds a comma in quotes" : "an empty cell still needs its comma");
    return false;
  }

  void empty(std::size_t column) {
    fault(cells_[column], fmt::format("{}: the cell is empty", header_.form->columns[column].name),
          "every row needs it");
  }

  const Header& header_;
  Faults& faults_;
  std::vector<ListCell> cells_;
  bool shaped_, sound_;
};

bool is_digits(const std::string& text) {
  return !text.empty() && std::all_of(text.begin(), text.end(), [](char c) { return c >= '0' && c <= '9'; });
}

std::optional<BoardRow> board_row(Row& row) {
  BoardRow out{row.cell("order"), row.cell("build_no"), row.cell("serial"), row.cell("panel"), row.cell("product"), 0};
  if (row.sound() && !is_digits(out.build_no.text) && is_digits(out.serial.text))
    row.fault(out.build_no, fmt::format("build_no: \"{}\" is not a number, but the serial is", out.build_no.text),
              "the columns \"build_no\" and \"serial\" look swapped");
  else
    out.number = row.number("build_no").value_or(0);
  return row.sound() ? std::optional(out) : std::nullopt;
}

std::optional<ReelRow> reel_row(Row& row, const Week& now) {
  ReelRow out{row.cell("reel"),
              row.cell("maker"),
              row.cell("part"),
              row.cell("lot"),
              row.cell("date_code"),
              row.cell("distributor"),
              row.cell("marking"),
              {},
              {},
              {}};
  if (!out.date_code.text.empty()) {
    const auto week = parse_date_code(out.date_code.text, now);
    if (week)
      out.week = text(week.value());
    else
      row.fault(out.date_code, "date_code: " + week.error().what, week.error().to_do);
  }
  out.rereeled = row.yes_no("rereeled");
  out.quantity = row.number("quantity");
  return row.sound() ? std::optional(out) : std::nullopt;
}

bool is_designator(const std::string& text) {
  auto letter = [](char c) { return (c >= 'A' && c <= 'Z') || (c >= 'a' && c <= 'z'); };
  auto fits = [&](char c) { return letter(c) || (c >= '0' && c <= '9') || c == '_' || c == '.' || c == '-'; };
  return !text.empty() && text.size() <= 32 && letter(text[0]) && std::all_of(text.begin(), text.end(), fits);
}

void check_designator(Row& row, const ListCell& designator) {
  if (designator.text.empty() || is_designator(designator.text)) return;
  row.fault(designator, fmt::format("\"{}\" is not a designator", designator.text),
            "write a place on the board, as in U7 or R12");
}

void check_backwards(Row& row, const ListCell& at, std::string_view low, std::int64_t from, std::string_view high,
                     std::int64_t to) {
  if (from <= to) return;
  row.fault(at, fmt::format("{} ({}) is above {} ({}): the range runs backwards", low, from, high, to),
            "write the lower build number first");
}

/// One end of the certain stretch without the other, or neither and no possible stretch.
void check_ends(Row& row, const FeedRow& feed, bool nowhere_certain) {
  if (feed.from.text.empty() && !feed.to.text.empty())
    row.fault(feed.from, "from: the cell is empty", "every row needs it");
  if (!feed.from.text.empty() && feed.to.text.empty())
    row.fault(feed.to, "to: the cell is empty", "every row needs it");
  if (!nowhere_certain || row.sound() == false) return;
  if (row.cell("possible_from").text.empty() || row.cell("possible_to").text.empty())
    row.fault(feed.from, "from: the cell is empty",
              "write the build numbers; where none is certain, give possible_from and possible_to");
}

std::optional<FeedRow> feed_row(Row& row) {
  FeedRow out{
      row.cell("order"), row.cell("designator"), row.cell("reel"), row.cell("from"), row.cell("to"), 0, 0, 0, 0};
  check_designator(row, out.designator);
  const bool nowhere_certain = out.from.text.empty() && out.to.text.empty();
  if (row.sound()) check_ends(row, out, nowhere_certain);
  const auto from = row.number("from"), to = row.number("to");
  const auto poss_from = row.number("possible_from"), poss_to = row.number("possible_to");
  if (!row.sound()) return std::nullopt;
  if (nowhere_certain) {
    check_backwards(row, row.cell("possible_from"), "possible_from", *poss_from, "possible_to", *poss_to);
    out.poss_from = *poss_from;
    out.poss_to = *poss_to;
    out.cert_from = *poss_to + 1;
    out.cert_to = *poss_from - 1;
    return row.sound() ? std::optional(out) : std::nullopt;
  }
  out.cert_from = *from;
  out.cert_to = *to;
  out.poss_from = poss_from.value_or(*from);
  out.poss_to = poss_to.value_or(*to);
  check_backwards(row, out.from, "from", *from, "to", *to);
  check_backwards(row, row.cell("possible_from"), "possible_from", out.poss_from, "from", *from);
  check_backwards(row, row.cell("possible_to"), "to", *to, "possible_to", out.poss_to);
  return row.sound() ? std::optional(out) : std::nullopt;
}

class ListsReader {
 public:
  ListsReader(const Week& now, Faults& faults) : now_(now), faults_(faults) {}

  void read(std::shared_ptr<const SourceText> source) {
    const std::size_t before = faults_.all().size();
    CsvReader csv(std::move(source), faults_);
    Lists::File file{csv.source(), {}, false};
    CsvRow cells;
    if (csv.next(cells)) {
      const Header header = HeaderReader(csv, faults_).read(cells);
      if (header.form != nullptr) file.kind = header.form->kind;
      if (header.sound) file.whole = read_rows(csv, header, before);
    } else if (!csv.broken()) {
      faults_.fault({csv.source(), 0, 0, 1}, "this file is empty", "its first line names the columns");
    }
    lists.files.push_back(file);
  }

  Lists lists;

 private:
  bool read_rows(CsvReader& csv, const Header& header, std::size_t faults_before) {
    CsvRow cells;
    while (csv.next(cells)) {
      take(header.form->kind, csv, header, cells);
      if (faults_.all().size() < faults_before + most_faults) continue;
      faults_.fault(csv.region(cells.front()), "too many faults: the file was not read beyond this row",
                    "mend these first");
      return false;
    }
    return !csv.broken();
  }

  void take(ListKind kind, const CsvReader& csv, const Header& header, const CsvRow& cells) {
    Row row(csv, header, cells, faults_);
    if (row.shaped() && kind == ListKind::boards) keep(row, board_row(row), lists.boards);
    if (row.shaped() && kind == ListKind::reels) keep(row, reel_row(row, now_), lists.reels);
    if (row.shaped() && kind == ListKind::feeds) keep(row, feed_row(row), lists.feeds);
    if (row.sound()) return;
    if (kind == ListKind::boards) lists.faulty_orders.push_back(row.cell("order").text);
    if (kind == ListKind::reels) lists.faulty_reels.push_back(row.cell("reel").text);
  }

  template <class T>
  static void keep(const Row& row, std::optional<T> made, std::vector<T>& list) {
    if (made && row.sound()) list.push_back(std::move(*made));
  }

  Week now_;
  Faults& faults_;
};

}  // namespace

Lists read_lists(const std::vector<std::shared_ptr<const SourceText>>& sources, const Week& now, Faults& faults) {
  ListsReader reader(now, faults);
  for (const auto& source : sources) reader.read(source);
  return std::move(reader.lists);
}

}  // namespace jigwright
