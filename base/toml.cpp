#include "base/toml.hpp"

#include <fmt/format.h>
#include <toml++/toml.h>

#include <algorithm>
#include <cmath>
#include <sstream>

#include "base/nearest.hpp"

namespace jigwright {
namespace {

using Source = std::shared_ptr<const SourceText>;

/// A file's text with the place of each line, so that finding one costs no search.
class Lines {
 public:
  explicit Lines(Source source) : source_(std::move(source)) {
    begins_.push_back(0);
    for (std::size_t at = 0; at < source_->text.size(); ++at)
      if (source_->text[at] == '\n') begins_.push_back(at + 1);
  }
  /// From 1; empty beyond the end.
  std::string_view line(unsigned number) const {
    if (number < 1 || number > begins_.size()) return {};
    const std::string_view rest = std::string_view(source_->text).substr(begins_[number - 1]);
    return rest.substr(0, rest.find('\n'));
  }
  const Source& source() const { return source_; }

 private:
  Source source_;
  std::vector<std::size_t> begins_;
};

/// Length in characters of the value or key that begins at this place, for the caret: a quoted text to its closing
/// quote, a bracket to its match on the line, else up to the next separator.
int stretch(std::string_view text, unsigned column) {
  std::size_t at = 0;
  auto step = [&] {
    ++at;
    while (at < text.size() && (static_cast<unsigned char>(text[at]) & 0xC0u) == 0x80u) ++at;
  };
  for (unsigned c = 1; c < column && at < text.size(); ++c) step();
  if (at >= text.size()) return 1;
  int length = 0;
  const char first = text[at];
  if (first == '"' || first == '\'') {
    bool escaped = false;
    do {
      escaped = first == '"' && !escaped && text[at] == '\\';
      step();
      ++length;
    } while (at < text.size() && (escaped || text[at] != first));
    return std::max(1, length + 1);
  }
  if (first == '[' || first == '{') {
    int depth = 0;
    while (at < text.size()) {
      if (text[at] == '[' || text[at] == '{') ++depth;
      if (text[at] == ']' || text[at] == '}') --depth;
      step();
      ++length;
      if (depth == 0) break;
    }
    return std::max(1, length);
  }
  while (at < text.size() && std::string_view(" \t,]}=#\r").find(text[at]) == std::string_view::npos) {
    step();
    ++length;
  }
  return std::max(1, length);
}

SourceRegion region_of(const Lines& lines, const toml::source_region& at) {
  const auto line = static_cast<unsigned>(at.begin.line);
  const auto column = static_cast<unsigned>(at.begin.column);
  return {lines.source(), static_cast<int>(line), static_cast<int>(column), stretch(lines.line(line), column)};
}

template <class T>
std::string printed(const T& value) {
  std::ostringstream out;
  out << value;
  return out.str();
}

Node convert(const toml::node& from, const Lines& lines);

Table convert_table(const toml::table& from, const Lines& lines) {
  std::vector<Member> members;
  for (const auto& [key, value] : from)
    members.push_back({std::string(key.str()), region_of(lines, key.source()), convert(value, lines)});
  std::stable_sort(members.begin(), members.end(), [](const Member& a, const Member& b) {
    if (a.key_region.line != b.key_region.line) return a.key_region.line < b.key_region.line;
    return a.key_region.column < b.key_region.column;
  });
  return members;
}

Node convert(const toml::node& from, const Lines& lines) {
  Node out;
  out.region = region_of(lines, from.source());
  if (const auto* s = from.as_string()) {
    out.value = s->get();
  } else if (const auto* i = from.as_integer()) {
    out.value = i->get();
  } else if (const auto* d = from.as_floating_point()) {
    out.value = d->get();
  } else if (const auto* b = from.as_boolean()) {
    out.value = b->get();
  } else if (const auto* a = from.as_array()) {
    Array items;
    for (const auto& item : *a) items.push_back(convert(item, lines));
    out.value = std::move(items);
  } else if (const auto* t = from.as_table()) {
    out.value = convert_table(*t, lines);
  } else {
    out.is_date = true;
    if (const auto* date = from.as_date()) out.value = printed(*date);
    if (const auto* time = from.as_time()) out.value = printed(*time);
    if (const auto* both = from.as_date_time()) out.value = printed(*both);
  }
  return out;
}

struct Syntax {
  std::string what;
  std::string to_do;
};

void exchange(std::string& text, std::string_view from, std::string_view to) {
  for (auto at = text.find(from); at != std::string::npos; at = text.find(from, at + to.size()))
    text.replace(at, from.size(), to);
}

/// What stands between the first two apostrophes.
std::string quoted_in(const std::string& text) {
  const auto begin = text.find('\'');
  const auto end = text.find('\'', begin + 1);
  return begin == std::string::npos || end == std::string::npos ? "" : text.substr(begin + 1, end - begin - 1);
}

/// The parser's words, made plain for the slips that people make. Words that it may change fall through as they are.
Syntax in_plain_words(std::string words, std::string_view line) {
  auto says = [&](std::string_view part) { return words.find(part) != std::string::npos; };
  const std::string_view opening = "Error while parsing ";
  if (says("cannot redefine existing table"))
    return {fmt::format("the table [{}] is there twice", quoted_in(words)), "join the two, or rename one"};
  if (says("cannot redefine")) return {fmt::format("\"{}\" is there twice", quoted_in(words)), "keep one of them"};
  if (says("control characters") && says("string"))
    return {"a quote is not closed", "close it on the line where it opens"};
  if (says("could not determine value type"))
    return {"this is no value", "write a text in quotes, a number, true, false, [ ... ] or { ... }"};
  if (says("expected a comment or whitespace"))
    return {"something follows the value", line.find('=') == std::string_view::npos
                                               ? "one thing a line; a comment begins with #"
                                               : "one value a line; a quantity stands in quotes, as in \"0.5 mV\""};
  if (words.starts_with(opening)) words = "while reading " + words.substr(opening.size());
  exchange(words, "key-value pair", "a key and its value");
  exchange(words, "saw '\\n'", "found the end of the line");
  exchange(words, "saw '\\r'", "found the end of the line");
  exchange(words, "saw ", "found ");
  exchange(words, "while reading table header", "while reading the [header] of a table");
  exchange(words, "while reading inline table", "while reading a table in { }");
  return {words, "mend this"};
}

/// A finite number, whole or not.
std::optional<double> number_of(const Node& node) {
  if (const auto* i = std::get_if<std::int64_t>(&node.value)) return static_cast<double>(*i);
  const auto* d = std::get_if<double>(&node.value);
  return d != nullptr && std::isfinite(*d) ? std::optional(*d) : std::nullopt;
}

std::string example_of(Unit unit) {
  if (unit == Unit::count) return "a number";
  return fmt::format("\"... {}\"", unit == Unit::ratio ? "ppm" : symbol(unit));
}

/// Ratios in per cent: what is usual is a round figure.
std::string usual_text(double value, Unit unit) {
  return unit == Unit::ratio ? fmt::format("{:g} %", value * 100) : format_quantity(value, unit);
}

}  // namespace

std::string_view Node::kind_name() const {
  if (is_date) return "a date or time";
  switch (value.index()) {
    case 0:
      return "a text";
    case 1:
      return "a whole number";
    case 2:
      return number_of(*this) ? "a decimal number" : "no finite number";
    case 3:
      return "true or false";
    case 4:
      return "an array";
    default:
      return "a table";
  }
}

const Node* find(const Table& table, std::string_view key) {
  for (const Member& m : table)
    if (m.key == key) return &m.node;
  return nullptr;
}

std::optional<Node> parse_toml(Source source, Faults& faults) {
  const Lines lines(source);
  try {
    const toml::table table = toml::parse(source->text, source->name);
    Node root;
    root.region = {source, 0, 0, 1};
    root.value = convert_table(table, lines);
    return root;
  } catch (const toml::parse_error& e) {
    const Syntax syntax = in_plain_words(std::string(e.description()), lines.line(e.source().begin.line));
    faults.fault(region_of(lines, e.source()), "not valid TOML: " + syntax.what,
                 syntax.to_do + "; nothing below this line was read");
    return std::nullopt;
  }
}

TableReader::TableReader(const Node& node, std::string about, Faults& faults)
    : node_(node), about_(std::move(about)), faults_(faults) {}

void TableReader::fault(const SourceRegion& at, std::string what, std::string to_do) {
  faults_.fault(at, (about_.empty() ? "" : about_ + ": ") + std::move(what), std::move(to_do));
}

void TableReader::warning(const SourceRegion& at, std::string what, std::string to_do) {
  faults_.warning(at, (about_.empty() ? "" : about_ + ": ") + std::move(what), std::move(to_do));
}

const Node* TableReader::ask(std::string_view key) {
  if (std::find(known_.begin(), known_.end(), key) == known_.end()) known_.emplace_back(key);
  const Table* table = node_.table();
  return table == nullptr ? nullptr : find(*table, key);
}

bool TableReader::has(std::string_view key) {
  return ask(key) != nullptr;
}
const Node* TableReader::node(std::string_view key) {
  return ask(key);
}

void TableReader::missing(std::string_view key, std::string_view expected) {
  missing_.push_back({std::string(key), faults_.all().size()});
  fault(node_.region, fmt::format("\"{}\" is missing", key), fmt::format("add {} = {}", key, expected));
}

void TableReader::wrong_kind(std::string_view key, const Node& found, std::string_view expected) {
  fault(found.region, fmt::format("\"{}\": expected {}, found {}", key, expected, found.kind_name()));
}

std::optional<Located<std::string>> TableReader::text(std::string_view key) {
  const Node* n = ask(key);
  if (n == nullptr) return std::nullopt;
  if (n->text() == nullptr || n->is_date) {
    wrong_kind(key, *n, "a text in quotes");
    return std::nullopt;
  }
  return Located<std::string>{*n->text(), n->region};
}

Located<std::string> TableReader::need_text(std::string_view key) {
  const bool there = ask(key) != nullptr;
  auto got = text(key);
  if (!there) missing(key, "\"...\"");
  if (got && got->value.empty()) fault(got->region, fmt::format("\"{}\" is empty", key), "write a text");
  return got.value_or(Located<std::string>{{}, node_.region});
}

std::optional<Located<double>> TableReader::read_quantity(const Node& n, std::string_view key, Unit unit,
                                                          std::optional<Plausible> plausible) {
  if (unit == Unit::count)
    if (const auto number = number_of(n)) return Located<double>{*number, n.region};
  if (n.text() == nullptr || n.is_date) {
    no_quantity(n, key, unit);
    return std::nullopt;
  }
  auto q = parse_quantity(*n.text(), unit);
  if (!q) {
    fault(n.region, fmt::format("\"{}\": {}", key, q.error().what), q.error().to_do);
    return std::nullopt;
  }
  if (plausible) doubt(n, key, q.value(), unit, *plausible);
  return Located<double>{q.value(), n.region};
}

void TableReader::no_quantity(const Node& n, std::string_view key, Unit unit) {
  const auto number = number_of(n);
  if (!number || unit == Unit::count) return wrong_kind(key, n, quantity_name(unit));
  const std::string_view word = unit == Unit::ratio ? "ppm" : symbol(unit);
  fault(n.region, fmt::format("\"{}\": {} has no unit, expected {}", key, *number, quantity_name(unit)),
        fmt::format("write it with its unit in quotes, as in \"{} {}\"", *number, word));
}

void TableReader::doubt(const Node& n, std::string_view key, double v, Unit unit, Plausible usual) {
  auto inside = [&](double x) { return x >= usual.low && x <= usual.high; };
  if (inside(v)) return;
  const std::string& text = *n.text();
  std::string hint = usual.low == 0
                         ? fmt::format("usual is at most {}", usual_text(usual.high, unit))
                         : fmt::format("usual is {} to {}", usual_text(usual.low, unit), usual_text(usual.high, unit));
  if (text.find('m') != std::string::npos && inside(v * 1e9))
    hint += fmt::format("; m is milli, for mega write M: \"{}\"", format_quantity(v * 1e9, unit));
  if (text.find('M') != std::string::npos && inside(v / 1e9))
    hint += fmt::format("; M is mega, for milli write m: \"{}\"", format_quantity(v / 1e9, unit));
  warning(n.region, fmt::format("\"{}\": \"{}\" is unusual", key, text), hint);
}

std::optional<Located<double>> TableReader::quantity(std::string_view key, Unit unit,
                                                     std::optional<Plausible> plausible) {
  const Node* n = ask(key);
  if (n == nullptr) return std::nullopt;
  return read_quantity(*n, key, unit, plausible);
}

Located<double> TableReader::need_quantity(std::string_view key, Unit unit, std::optional<Plausible> plausible) {
  if (ask(key) == nullptr) missing(key, example_of(unit));
  return quantity(key, unit, plausible).value_or(Located<double>{0, node_.region});
}

Located<double> TableReader::need_positive(std::string_view key, Unit unit, std::optional<Plausible> plausible) {
  return need_signed(
      key, unit, plausible, [](double v) { return v > 0; }, "more than zero");
}

Located<double> TableReader::need_not_negative(std::string_view key, Unit unit, std::optional<Plausible> plausible) {
  return need_signed(
      key, unit, plausible, [](double v) { return v >= 0; }, "zero or more");
}

Located<double> TableReader::need_signed(std::string_view key, Unit unit, std::optional<Plausible> plausible,
                                         bool (*allowed)(double), std::string_view expected) {
  const Node* n = ask(key);
  if (n == nullptr) return need_quantity(key, unit);
  const auto got = read_quantity(*n, key, unit, std::nullopt);
  if (!got) return {0, node_.region};
  if (!allowed(got->value))
    fault(got->region, fmt::format("\"{}\": expected {}, found {}", key, expected,
                                   n->text() != nullptr ? "\"" + *n->text() + "\"" : fmt::format("{}", got->value)));
  else if (plausible && n->text() != nullptr)
    doubt(*n, key, got->value, unit, *plausible);
  return *got;
}

std::optional<Located<std::int64_t>> TableReader::integer(std::string_view key, std::int64_t low, std::int64_t high) {
  const Node* n = ask(key);
  if (n == nullptr) return std::nullopt;
  const auto* i = std::get_if<std::int64_t>(&n->value);
  if (i == nullptr) {
    wrong_kind(key, *n, "a whole number");
    return std::nullopt;
  }
  if (*i < low || *i > high) {
    fault(n->region, fmt::format("\"{}\": expected {} to {}, found {}", key, low, high, *i));
    return std::nullopt;
  }
  return Located<std::int64_t>{*i, n->region};
}

Located<std::int64_t> TableReader::need_integer(std::string_view key, std::int64_t low, std::int64_t high) {
  if (ask(key) == nullptr) missing(key, fmt::format("{} (a whole number from {} to {})", low, low, high));
  return integer(key, low, high).value_or(Located<std::int64_t>{low, node_.region});
}

std::optional<Located<bool>> TableReader::boolean(std::string_view key) {
  const Node* n = ask(key);
  if (n == nullptr) return std::nullopt;
  const auto* b = std::get_if<bool>(&n->value);
  if (b == nullptr) {
    wrong_kind(key, *n, "true or false");
    return std::nullopt;
  }
  return Located<bool>{*b, n->region};
}

std::optional<Located<std::string>> TableReader::choice(std::string_view key, const std::vector<std::string>& words) {
  auto got = text(key);
  if (!got) return std::nullopt;
  if (std::find(words.begin(), words.end(), got->value) != words.end()) return got;
  const auto near = nearest(got->value, words);
  fault(got->region, fmt::format("\"{}\": unknown word \"{}\"", key, got->value),
        near ? fmt::format("write \"{}\"; known are: {}", *near, listed(words))
             : fmt::format("known are: {}", listed(words)));
  return std::nullopt;
}

Located<std::string> TableReader::need_choice(std::string_view key, const std::vector<std::string>& words) {
  if (ask(key) == nullptr) missing(key, fmt::format("\"...\", one of: {}", listed(words)));
  return choice(key, words).value_or(Located<std::string>{words.empty() ? "" : words.front(), node_.region});
}

Located<std::string> TableReader::need_id(std::string_view thing, std::vector<Located<std::string>>& seen) {
  auto id = need_text("id");
  if (id.value.empty()) return id;
  rename(fmt::format("{} \"{}\"", thing, id.value));
  for (const auto& other : seen)
    if (other.value == id.value)
      faults_.fault(id.region, fmt::format("{} \"{}\" is there twice", thing, id.value),
                    fmt::format("first at line {}; give each its own id", other.region.line));
  seen.push_back(id);
  return id;
}

std::vector<Located<std::string>> TableReader::texts(std::string_view key) {
  std::vector<Located<std::string>> out;
  const Node* n = ask(key);
  if (n == nullptr) return out;
  auto take = [&](const Node& item) {
    if (item.text() != nullptr && !item.is_date)
      out.push_back({*item.text(), item.region});
    else
      wrong_kind(key, item, "a text in quotes");
  };
  if (n->array() == nullptr)
    take(*n);
  else
    for (const Node& item : *n->array()) take(item);
  return out;
}

std::vector<Located<std::string>> TableReader::need_texts(std::string_view key) {
  const Node* n = ask(key);
  if (n == nullptr) missing(key, "[\"...\"]");
  auto out = texts(key);
  if (n != nullptr && n->array() != nullptr && n->array()->empty())
    fault(n->region, fmt::format("\"{}\" is empty", key), "name at least one");
  return out;
}

std::vector<Located<double>> TableReader::quantities(std::string_view key, Unit unit) {
  std::vector<Located<double>> out;
  const Node* n = ask(key);
  if (n == nullptr) return out;
  auto take = [&](const Node& item) {
    if (auto q = read_quantity(item, key, unit, std::nullopt)) out.push_back(*q);
  };
  if (n->array() == nullptr)
    take(*n);
  else
    for (const Node& item : *n->array()) take(item);
  return out;
}

std::optional<Located<Quantity>> TableReader::any_quantity(std::string_view key) {
  const Node* n = ask(key);
  if (n == nullptr) return std::nullopt;
  if (const auto number = number_of(*n)) return Located<Quantity>{{*number, Unit::count}, n->region};
  if (n->text() == nullptr || n->is_date) {
    wrong_kind(key, *n, "a quantity with its unit, as in \"0.5 mV\"");
    return std::nullopt;
  }
  auto q = parse_quantity(*n->text());
  if (q) return Located<Quantity>{q.value(), n->region};
  fault(n->region, fmt::format("\"{}\": {}", key, q.error().what), q.error().to_do);
  return std::nullopt;
}

const Node* TableReader::table(std::string_view key) {
  const Node* n = ask(key);
  if (n == nullptr) return nullptr;
  if (n->table() == nullptr) {
    wrong_kind(key, *n, "a table");
    return nullptr;
  }
  return n;
}

const Node* TableReader::need_table(std::string_view key) {
  if (ask(key) == nullptr) {
    missing_.push_back({std::string(key), faults_.all().size()});
    fault(node_.region, fmt::format("the table [{}] is missing", key),
          fmt::format("add a line [{}] and its keys", key));
  }
  return table(key);
}

std::vector<const Node*> TableReader::tables(std::string_view key) {
  std::vector<const Node*> out;
  const Node* n = ask(key);
  if (n == nullptr) return out;
  if (n->array() == nullptr) {
    wrong_kind(key, *n, fmt::format("an array of tables, [[{}]]", key));
    return out;
  }
  for (const Node& item : *n->array()) {
    if (item.table() != nullptr)
      out.push_back(&item);
    else
      wrong_kind(key, item, "a table");
  }
  return out;
}

void TableReader::finish() {
  const Table* table = node_.table();
  if (table == nullptr) return;
  for (const Member& m : *table)
    if (std::find(known_.begin(), known_.end(), m.key) == known_.end()) unknown(m);
}

/// A misspelt key is told once: not also as the missing one that it was meant to be.
void TableReader::unknown(const Member& m) {
  const auto near = nearest(m.key, known_);
  const std::string what = (about_.empty() ? "" : about_ + ": ") + fmt::format("unknown key \"{}\"", m.key);
  const std::string to_do = near ? fmt::format("write {}", *near) : fmt::format("known keys here: {}", listed(known_));
  const auto meant = std::find_if(missing_.begin(), missing_.end(), [&](const Missing& a) { return a.key == near; });
  if (meant == missing_.end()) return faults_.fault(m.key_region, what, to_do);
  faults_.replace(meant->index, m.key_region, what, to_do);
  missing_.erase(meant);
}

}  // namespace jigwright
