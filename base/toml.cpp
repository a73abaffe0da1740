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

/// Length in characters of the value or key that begins at this place, for the caret: a quoted text to its closing
/// quote, a bracket to its match on the line, else up to the next separator.
int stretch(const SourceText& source, unsigned line, unsigned column) {
  std::string_view text = source.text;
  for (unsigned at = 1; at < line; ++at) {
    const auto end = text.find('\n');
    if (end == std::string_view::npos) return 1;
    text.remove_prefix(end + 1);
  }
  text = text.substr(0, text.find('\n'));
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

SourceRegion region_of(const Source& source, const toml::source_region& at) {
  const auto line = static_cast<unsigned>(at.begin.line);
  const auto column = static_cast<unsigned>(at.begin.column);
  return {source, static_cast<int>(line), static_cast<int>(column), stretch(*source, line, column)};
}

template <class T>
std::string printed(const T& value) {
  std::ostringstream out;
  out << value;
  return out.str();
}

Node convert(const toml::node& from, const Source& source);

Table convert_table(const toml::table& from, const Source& source) {
  std::vector<Member> members;
  for (const auto& [key, value] : from)
    members.push_back({std::string(key.str()), region_of(source, key.source()), convert(value, source)});
  std::stable_sort(members.begin(), members.end(), [](const Member& a, const Member& b) {
    if (a.key_region.line != b.key_region.line) return a.key_region.line < b.key_region.line;
    return a.key_region.column < b.key_region.column;
  });
  return members;
}

Node convert(const toml::node& from, const Source& source) {
  Node out;
  out.region = region_of(source, from.source());
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
    for (const auto& item : *a) items.push_back(convert(item, source));
    out.value = std::move(items);
  } else if (const auto* t = from.as_table()) {
    out.value = convert_table(*t, source);
  } else {
    out.is_date = true;
    if (const auto* date = from.as_date()) out.value = printed(*date);
    if (const auto* time = from.as_time()) out.value = printed(*time);
    if (const auto* both = from.as_date_time()) out.value = printed(*both);
  }
  return out;
}

/// A finite number, whole or not.
std::optional<double> number_of(const Node& node) {
  if (const auto* i = std::get_if<std::int64_t>(&node.value)) return static_cast<double>(*i);
  const auto* d = std::get_if<double>(&node.value);
  return d != nullptr && std::isfinite(*d) ? std::optional(*d) : std::nullopt;
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
      return "a number";
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
  try {
    const toml::table table = toml::parse(source->text, source->name);
    Node root;
    root.region = {source, 0, 0, 1};
    root.value = convert_table(table, source);
    return root;
  } catch (const toml::parse_error& e) {
    std::string what(e.description());
    const std::string_view opening = "Error while parsing ";
    if (what.starts_with(opening)) what = "while reading " + what.substr(opening.size());
    faults.fault(region_of(source, e.source()), "not valid TOML: " + what, "nothing below this line was read");
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
    const bool number = n.value.index() == 1 || n.value.index() == 2;
    fault(n.region,
          fmt::format("\"{}\": expected {} as a text with its unit, found {}", key, quantity_name(unit), n.kind_name()),
          number ? "write the number with its unit in quotes" : "");
    return std::nullopt;
  }
  auto q = parse_quantity(*n.text(), unit);
  if (!q) {
    fault(n.region, fmt::format("\"{}\": {}", key, q.error().what), q.error().to_do);
    return std::nullopt;
  }
  const double v = q.value();
  if (plausible && (v < plausible->low || v > plausible->high)) {
    auto inside = [&](double x) { return x >= plausible->low && x <= plausible->high; };
    std::string hint =
        fmt::format("usual is {} to {}", format_quantity(plausible->low, unit), format_quantity(plausible->high, unit));
    if (n.text()->find('m') != std::string::npos && inside(v * 1e9))
      hint += fmt::format("; m is milli, for mega write M: \"{}\"", format_quantity(v * 1e9, unit));
    if (n.text()->find('M') != std::string::npos && inside(v / 1e9))
      hint += fmt::format("; M is mega, for milli write m: \"{}\"", format_quantity(v / 1e9, unit));
    warning(n.region, fmt::format("\"{}\": {} is unusual", key, format_quantity(v, unit)), hint);
  }
  return Located<double>{v, n.region};
}

std::optional<Located<double>> TableReader::quantity(std::string_view key, Unit unit,
                                                     std::optional<Plausible> plausible) {
  const Node* n = ask(key);
  if (n == nullptr) return std::nullopt;
  return read_quantity(*n, key, unit, plausible);
}

Located<double> TableReader::need_quantity(std::string_view key, Unit unit, std::optional<Plausible> plausible) {
  if (ask(key) == nullptr) missing(key, fmt::format("\"... {}\"", symbol(unit)));
  return quantity(key, unit, plausible).value_or(Located<double>{0, node_.region});
}

Located<double> TableReader::need_positive(std::string_view key, Unit unit, std::optional<Plausible> plausible) {
  const bool there = has(key);
  const auto got = there ? quantity(key, unit, plausible) : need_quantity(key, unit, plausible);
  if (there && got && !(got->value > 0))
    fault(got->region,
          fmt::format("\"{}\": expected more than zero, found {}", key, format_quantity(got->value, unit)));
  return got.value_or(Located<double>{0, node_.region});
}

Located<double> TableReader::need_not_negative(std::string_view key, Unit unit, std::optional<Plausible> plausible) {
  const bool there = has(key);
  const auto got = there ? quantity(key, unit, plausible) : need_quantity(key, unit, plausible);
  if (there && got && !(got->value >= 0))
    fault(got->region, fmt::format("\"{}\": expected zero or more, found {}", key, format_quantity(got->value, unit)));
  return got.value_or(Located<double>{0, node_.region});
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
  if (ask(key) == nullptr) missing(key, fmt::format("one of: {}", listed(words)));
  return choice(key, words).value_or(Located<std::string>{words.empty() ? "" : words.front(), node_.region});
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
  if (ask(key) == nullptr) fault(node_.region, fmt::format("the table [{}] is missing", key));
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
  for (const Member& m : *table) {
    if (std::find(known_.begin(), known_.end(), m.key) != known_.end()) continue;
    const auto near = nearest(m.key, known_);
    fault(m.key_region, fmt::format("unknown key \"{}\"", m.key),
          near ? fmt::format("write {}", *near) : fmt::format("known keys here: {}", listed(known_)));
  }
}

}  // namespace jigwright
