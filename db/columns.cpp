#include "db/columns.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <bit>
#include <cstring>
#include <limits>

#include "db/sqlite.hpp"

namespace jigwright {
namespace {

using Id = std::int64_t;

constexpr char form = 1;
constexpr std::size_t words = static_cast<std::size_t>(stretch_trials) / 64;
constexpr int most_looked = 200;  ///< older stretches in one upkeep
constexpr Id most_reserved = 1 << 22;
constexpr Id most_stretches = std::numeric_limits<Id>::max() / stretch_trials - 4;  ///< beyond it, ids are damage

Id first_trial(Id stretch) {
  return stretch_trials * stretch + 1;
}
Id stretch_of(Id trial) {
  return (trial - 1) / stretch_trials;
}

std::uint64_t low_first(std::uint64_t word) {
  return std::endian::native == std::endian::little ? word : __builtin_bswap64(word);
}

template <class T>
void put(std::string& out, T value, std::size_t bytes = sizeof(T)) {
  const std::uint64_t word = low_first(std::bit_cast<std::uint64_t>(value));
  out.append(reinterpret_cast<const char*>(&word), bytes);
}

/// Takes from the front of a body; what is not there reads as 0 and shows in failed.
struct Taker {
  std::string_view left;
  bool failed{false};

  std::string_view bytes(std::size_t count) {
    failed = failed || left.size() < count;
    if (failed) return {};
    const std::string_view out = left.substr(0, count);
    left.remove_prefix(count);
    return out;
  }
  std::uint64_t number(std::size_t count) {
    std::uint64_t word = 0;
    const std::string_view from = bytes(count);
    if (!from.empty()) std::memcpy(&word, from.data(), from.size());
    return low_first(word);
  }
};

/// One metric's findings in one stretch.
struct Column {
  Id metric{};
  std::array<std::uint64_t, words> present{};
  std::string values, marks;
};

/// Which metrics a stretch has findings of.
struct Directory {
  Id least{0};
  std::string bits;

  bool has(Id metric) const {
    const auto at = static_cast<std::size_t>(metric - least);
    return metric >= least && at / 8 < bits.size() && ((bits[at / 8] >> (at % 8)) & 1) != 0;
  }
  std::int64_t count() const {
    std::int64_t out = 0;
    for (const char c : bits) out += std::popcount(static_cast<unsigned char>(c));
    return out;
  }
};

/// nullopt where the metric ids lie too far apart for the form; no store of this program's making has such.
std::optional<Directory> directory_of(const std::vector<Column>& columns) {
  Directory out;
  if (columns.empty()) return out;
  out.least = columns.front().metric;
  const Id most = columns.back().metric;
  if (out.least < 0 || out.least > 0xffff'ffff || most - out.least >= 8 * 0xffff) return std::nullopt;
  out.bits.resize(static_cast<std::size_t>(most - out.least) / 8 + 1);
  for (const Column& c : columns) {
    const auto at = static_cast<std::size_t>(c.metric - out.least);
    out.bits[at / 8] = static_cast<char>(out.bits[at / 8] | (1 << (at % 8)));
  }
  return out;
}

std::string body_of(const Column& column, const Directory& directory) {
  std::string out(1, form);
  put(out, static_cast<std::uint64_t>(directory.least), 4);
  put(out, static_cast<std::uint64_t>(directory.bits.size()), 2);
  out += directory.bits;
  for (const std::uint64_t word : column.present) put(out, word);
  return out + column.values + column.marks;
}

std::optional<Directory> take_directory(Taker& from) {
  Directory out;
  if (from.number(1) != static_cast<std::uint64_t>(form)) return std::nullopt;
  out.least = static_cast<Id>(from.number(4));
  out.bits = from.bytes(from.number(2));
  return from.failed ? std::nullopt : std::optional(std::move(out));
}

bool known(char mark) {
  return (mark & 7) <= static_cast<int>(FindingState::skipped) &&
         (mark >> 3 & 7) <= static_cast<int>(Verdict::invalid) && (mark & 0x80) == 0;
}

void add_mark(MetricColumns& out, char mark) {
  out.states.push_back(static_cast<FindingState>(mark & 7));
  out.verdicts.push_back(static_cast<Verdict>(mark >> 3 & 7));
  out.firsts.push_back(static_cast<std::uint8_t>(mark >> 6 & 1));
}

/// Adds what a block holds; false, and nothing added, when it is damaged.
bool add_block(MetricColumns& out, Id stretch, std::string_view body) {
  Taker from{body};
  if (!take_directory(from)) return false;
  std::array<std::uint64_t, words> present{};
  std::size_t count = 0;
  for (std::uint64_t& word : present) count += static_cast<std::size_t>(std::popcount(word = from.number(8)));
  const std::string_view values = from.bytes(8 * count), marks = from.bytes(count);
  if (from.failed || !from.left.empty() || !std::all_of(marks.begin(), marks.end(), known)) return false;
  for (std::size_t i = 0; i < words; ++i)
    for (std::uint64_t word = present[i]; word != 0; word &= word - 1)
      out.trials.push_back(first_trial(stretch) + static_cast<Id>(64 * i) + std::countr_zero(word));
  Taker numbers{values};
  for (std::size_t i = 0; i < count; ++i) out.values.push_back(std::bit_cast<double>(numbers.number(8)));
  for (const char mark : marks) add_mark(out, mark);
  return true;
}

char mark_of(Id state, Id verdict, bool first) {
  return static_cast<char>((state & 7) | (verdict & 7) << 3 | (first ? 64 : 0));
}

void add_rows(Database& database, MetricColumns& out, Id metric, Id stretch) {
  Query q = database.query(
      "SELECT t.id, f.value, f.state, f.verdict, t.attempt FROM trial t CROSS JOIN finding f ON f.trial = t.id AND "
      "f.metric = ? WHERE t.id BETWEEN ? AND ? ORDER BY t.id",
      metric, first_trial(stretch), first_trial(stretch + 1) - 1);
  while (q.next()) {
    out.trials.push_back(q.integer(0));
    out.values.push_back(q.real(1));
    add_mark(out, mark_of(q.integer(2), q.integer(3), q.integer(4) == 1));
  }
}

void reserve(MetricColumns& out, Id trials) {
  const auto count = static_cast<std::size_t>(std::clamp<Id>(trials, 0, most_reserved));
  out.trials.reserve(count);
  out.values.reserve(count);
  out.states.reserve(count);
  out.verdicts.reserve(count);
  out.firsts.reserve(count);
}

/// Tells why a stretch has no block of a metric, by another block of it.
class Witness {
 public:
  explicit Witness(Database& database) : db_(database) {}

  /// Any block's directory; nullopt where there is none.
  std::optional<Directory> directory(Id stretch) {
    if (auto found =
            of(db_.query("SELECT metric, body FROM column_block WHERE metric = ? AND stretch = ?", metric_, stretch)))
      return found;
    return of(
        db_.query("SELECT b.metric, b.body FROM metric m CROSS JOIN column_block b ON b.metric = m.id AND b.stretch = "
                  "? ORDER BY m.id LIMIT 1",
                  stretch));
  }

 private:
  std::optional<Directory> of(Query query) {
    if (!query.next()) return std::nullopt;
    metric_ = query.integer(0);
    Taker body{query.view(1)};
    return take_directory(body);
  }

  Database& db_;
  Id metric_{0};  ///< that had one last
};

/// Every metric's findings in a stretch, by rising metric, in one scan. nullopt while one of its trials is open.
class StretchRows {
 public:
  explicit StretchRows(Database& database) : db_(database) {}

  std::optional<std::vector<Column>> read(Id stretch) {
    if (!read_trials(stretch)) return std::nullopt;
    std::vector<Column> out;
    std::size_t at = 0;
    Query q = db_.query("SELECT trial, metric, value, state, verdict FROM finding WHERE trial BETWEEN ? AND ?",
                        first_trial(stretch), first_trial(stretch + 1) - 1);
    while (q.next()) {
      Column& column = column_of(out, q.integer(1), at);
      const auto i = static_cast<std::size_t>(q.integer(0) - first_trial(stretch));
      column.present[i / 64] |= std::uint64_t{1} << (i % 64);
      put(column.values, q.real(2));
      column.marks += mark_of(q.integer(3), q.integer(4), first_[i]);
    }
    std::sort(out.begin(), out.end(), [](const Column& a, const Column& b) { return a.metric < b.metric; });
    return out;
  }

 private:
  bool read_trials(Id stretch) {
    first_.fill(false);
    Query q = db_.query("SELECT id, state, attempt FROM trial WHERE id BETWEEN ? AND ?", first_trial(stretch),
                        first_trial(stretch + 1) - 1);
    while (q.next()) {
      if (q.integer(1) == 0) return false;
      first_[static_cast<std::size_t>(q.integer(0) - first_trial(stretch))] = q.integer(2) == 1;
    }
    return true;
  }

  /// A trial's metrics come in the same order as the trial's before: mostly the next one.
  static Column& column_of(std::vector<Column>& columns, Id metric, std::size_t& at) {
    for (std::size_t i = 0; i < columns.size(); ++i) {
      at = at + 1 < columns.size() ? at + 1 : 0;
      if (columns[at].metric == metric) return columns[at];
    }
    at = columns.size();
    columns.emplace_back().metric = metric;
    return columns.back();
  }

  Database& db_;
  std::array<bool, stretch_trials> first_{};
};

/// The stretch of the newest trial, the first that is not complete; 0 in an empty store.
Id under_way(Database& database) {
  const Id newest = database.first("SELECT max(id) FROM trial").value_or(0);
  return std::min(stretch_of(std::max<Id>(1, newest)), most_stretches);
}

std::optional<Id> stretch_of(const std::optional<Id>& trial) {
  if (!trial || stretch_of(*trial) > most_stretches) return std::nullopt;
  return stretch_of(*trial);
}

/// The first stretch from this one on that has a trial; the last one before it.
std::optional<Id> stretch_from(Database& database, Id stretch) {
  return stretch_of(database.first("SELECT id FROM trial WHERE id >= ? ORDER BY id LIMIT 1", first_trial(stretch)));
}
std::optional<Id> stretch_before(Database& database, Id stretch) {
  return stretch_of(database.first("SELECT id FROM trial WHERE id BETWEEN 1 AND ? ORDER BY id DESC LIMIT 1",
                                   first_trial(stretch) - 1));
}

std::string block_name(Database& database, Id metric, Id stretch) {
  Query q = database.query("SELECT step, name, variant FROM metric WHERE id = ?", metric);
  const std::string name = q.next() ? label({q.text(0), q.text(1), q.text(2)}) : "an unknown metric";
  return fmt::format("the column block of {}, trials {} to {}", name, first_trial(stretch),
                     first_trial(stretch + 1) - 1);
}

}  // namespace

Result<MetricColumns> read_columns(Database& database, std::int64_t metric) {
  MetricColumns out;
  reserve(out, database.first("SELECT max(id) FROM trial").value_or(0));
  Witness witness(database);
  Id next = 0;
  auto rows_up_to = [&](Id end) {  // stretches without a block
    for (auto at = stretch_from(database, next); at && *at < end; at = stretch_from(database, *at + 1)) {
      const auto directory = witness.directory(*at);
      if (!directory || directory->has(metric)) add_rows(database, out, metric, *at);
    }
    next = end;
  };
  const Id last = under_way(database);
  Query q = database.query(
      "SELECT stretch, body FROM column_block WHERE metric = ? AND stretch BETWEEN 0 AND ? ORDER BY stretch", metric,
      last - 1);
  while (q.next()) {
    const Id stretch = q.integer(0);
    if (stretch > next) rows_up_to(stretch);
    if (!add_block(out, stretch, q.view(1))) add_rows(database, out, metric, stretch);
    next = stretch + 1;
  }
  rows_up_to(last + 1);
  return database.result(std::move(out));
}

Result<MetricColumns> read_metric(Database& database, const std::string& step, const std::string& name,
                                  const std::string& variant, std::optional<Unit> unit) {
  Transaction reading(database, Transaction::Kind::read);
  auto found = find_metrics(database, step, name, variant);
  if (!found) return found.error();
  auto& metrics = found.value();
  if (unit) std::erase_if(metrics, [&](const KnownMetric& known) { return known.metric.unit != *unit; });
  if (metrics.empty())
    return Error{Error::Kind::usage,
                 fmt::format("{} was never found as {}", label({step, name, variant}), quantity_name(*unit)),
                 database.path(), "ask for it without a unit"};
  return read_columns(database, metrics.back().id);
}

Result<int> ColumnKeeper::upkeep(int most_built) {
  if (const auto seen = look(); !seen) return seen.error();
  int built = 0, looked = 0;
  while (built < most_built) {
    const auto stretch = next(looked);
    if (!stretch) break;
    const auto settled = settle(*stretch);
    if (!settled || settled.value() == Settled::open) later_.push_back(*stretch);
    if (!settled) return settled.error();
    if (settled.value() == Settled::built) ++built;
  }
  return built;
}

/// Where a stretch has become complete, what had to wait is looked at again too.
Result<Done> ColumnKeeper::look() {
  Transaction reading(db_, Transaction::Kind::read);
  const Stretch last = under_way(db_);
  if (db_.failed()) return db_.error();
  if (!top_) top_ = bottom_ = last;
  if (last > last_) again_.insert(again_.end(), later_.begin(), later_.end());
  if (last > last_) later_.clear();
  last_ = last;
  return Done{};
}

std::optional<ColumnKeeper::Stretch> ColumnKeeper::next(int& looked) {
  if (!again_.empty()) {
    const Stretch out = again_.back();
    again_.pop_back();
    return out;
  }
  Transaction reading(db_, Transaction::Kind::read);
  if (*top_ < last_) {
    const auto newer = stretch_from(db_, *top_);
    top_ = newer && *newer < last_ ? *newer + 1 : last_;
    if (newer && *newer < last_) return newer;
  }
  if (bottom_ == 0 || looked++ == most_looked) return std::nullopt;
  const auto older = stretch_before(db_, bottom_);
  bottom_ = older.value_or(0);
  return older;
}

ColumnKeeper::Settled ColumnKeeper::found(Stretch stretch) {
  const auto directory = Witness(db_).directory(stretch);
  const auto held = db_.first(
      "SELECT count(*) FROM metric m CROSS JOIN column_block b ON b.metric = m.id AND b.stretch = ?", stretch);
  return directory && held == directory->count() ? Settled::whole : Settled::open;
}

Result<ColumnKeeper::Settled> ColumnKeeper::settle(Stretch stretch) {
  {
    Transaction reading(db_, Transaction::Kind::read);
    if (found(stretch) == Settled::whole) return Settled::whole;
    if (db_.failed()) return db_.error();
  }
  Transaction writing(db_, Transaction::Kind::write);
  const auto columns = StretchRows(db_).read(stretch);
  const auto directory = columns ? directory_of(*columns) : std::nullopt;
  if (!directory && !db_.failed()) return Settled::open;
  for (std::size_t i = 0; directory && i < columns->size(); ++i)
    db_.run("INSERT OR IGNORE INTO column_block(metric, stretch, body) VALUES(?, ?, ?)", (*columns)[i].metric, stretch,
            Blob{body_of((*columns)[i], *directory)});
  const auto done = writing.commit();
  if (!done) return done.error();
  return Settled::built;
}

namespace {

using Blocks = std::vector<std::pair<Id, std::string>>;

Blocks blocks_of(Database& database, Id stretch) {
  Blocks out;
  Query q = database.query(
      "SELECT b.metric, b.body FROM metric m CROSS JOIN column_block b ON b.metric = m.id AND b.stretch = ?", stretch);
  while (q.next()) out.emplace_back(q.integer(0), q.text(1));
  return out;
}

bool borne_out(const std::vector<Column>& columns, const Directory& directory, Id metric, const std::string& body) {
  const auto column = std::find_if(columns.begin(), columns.end(), [&](const Column& c) { return c.metric == metric; });
  return column != columns.end() && body_of(*column, directory) == body;
}

}  // namespace

void check_blocks(Database& database, const std::function<void(std::string)>& differs) {
  StretchRows rows(database);
  Id checked = 0;
  const Id last = under_way(database);
  for (auto stretch = stretch_from(database, 0); stretch; stretch = stretch_from(database, *stretch + 1)) {
    const Blocks blocks = blocks_of(database, *stretch);
    if (blocks.empty()) continue;
    checked += static_cast<Id>(blocks.size());
    const auto columns = *stretch < last ? rows.read(*stretch) : std::nullopt;  // no block may stand yet
    const auto directory = columns ? directory_of(*columns) : std::nullopt;
    for (const auto& [metric, body] : blocks)
      if (!directory || !borne_out(*columns, *directory, metric, body))
        differs(block_name(database, metric, *stretch) + ": it is not what the findings give");
  }
  const auto all = database.first("SELECT count(*) FROM column_block");
  if (all && *all != checked) differs(fmt::format("{} column blocks belong to no metric or trial", *all - checked));
}

}  // namespace jigwright
