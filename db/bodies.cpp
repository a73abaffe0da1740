#include "db/bodies.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <numeric>
#include <tuple>

#include "db/digest.hpp"
#include "limits/judge.hpp"

namespace jigwright {
namespace {

/// Columns [from, to) of the row, each by its type and value.
void add_columns(Canonical& body, const Query& q, int from, int to) {
  static_assert(static_cast<char>(Query::Type::blob) == static_cast<char>(ColumnType::blob));
  for (int i = from; i < to; ++i) {
    const auto type = q.type(i);
    body.mark(static_cast<char>(type));
    if (type == Query::Type::integer) body.add(q.integer(i));
    if (type == Query::Type::real) body.add(q.real(i));
    if (type == Query::Type::text || type == Query::Type::blob) body.add(q.view(i));
  }
}

/// Every row of a query, behind its number of columns.
void add_rows(Canonical& body, Query q, int columns) {
  while (q.next()) {
    body.mark(static_cast<char>(columns));
    add_columns(body, q, 0, columns);
  }
}

Part part_of(const Canonical& body) {
  return {body.bytes(), sha256(body.bytes())};
}

Part part_of(Query q, int columns) {
  Canonical body;
  add_rows(body, std::move(q), columns);
  return part_of(body);
}

auto key_of(const Metric& m) {
  return std::tuple(std::string_view(m.name.step), std::string_view(m.name.name), std::string_view(m.name.variant),
                    symbol(m.unit), static_cast<int>(m.about));
}

/// The metric's five columns, without their number.
void add_metric(Canonical& body, const Metric& m) {
  body.text(m.name.step).text(m.name.name).text(m.name.variant).text(symbol(m.unit)).integer(static_cast<int>(m.about));
}

}  // namespace

Part limits_part(const std::vector<std::pair<Metric, Limit>>& limits) {
  std::vector<const std::pair<Metric, Limit>*> sorted;
  for (const auto& row : limits) sorted.push_back(&row);
  std::sort(sorted.begin(), sorted.end(),
            [](const auto* a, const auto* b) { return key_of(a->first) < key_of(b->first); });
  Canonical body;
  for (const auto* row : sorted) {
    const Limit& l = row->second;
    body.mark(16);
    add_metric(body, row->first);
    body.maybe(l.specification.low).maybe(l.specification.high).real(l.nominal).integer(static_cast<int>(l.guard));
    body.real(l.share).real(l.budget_U).real(l.budget_of_reading).real(l.width);
    body.maybe(l.applied.low).maybe(l.applied.high).unless_empty(l.reason);
  }
  return part_of(body);
}

Part instruments_part(std::vector<InstrumentIdentity> instruments) {
  const auto key = [](const InstrumentIdentity& i) {
    return std::tie(i.instrument, i.maker, i.model, i.serial, i.firmware);
  };
  std::sort(instruments.begin(), instruments.end(), [&](const auto& a, const auto& b) { return key(a) < key(b); });
  const auto same = [&](const auto& a, const auto& b) { return key(a) == key(b); };
  instruments.erase(std::unique(instruments.begin(), instruments.end(), same), instruments.end());
  Canonical body;
  for (const InstrumentIdentity& i : instruments)
    body.mark(5).text(i.instrument).text(i.maker).text(i.model).text(i.serial).text(i.firmware);
  return part_of(body);
}

Part versions_part(std::vector<std::pair<std::string, int>> versions) {
  std::sort(versions.begin(), versions.end());
  Canonical body;
  for (const auto& [kind, version] : versions) body.mark(2).text(kind).integer(version);
  return part_of(body);
}

template <class Read>
const Part& Bodies::known(Known& held, Id id, Read read) {
  const auto [at, fresh] = held.try_emplace(id);
  if (fresh) at->second = read();
  return at->second;
}

Part Bodies::setup_part(const std::string& plan, const std::string& program, const std::vector<Id>& documents) {
  std::vector<std::string> rows;
  for (Id id : documents) {
    Canonical row;
    add_rows(row, db_.query("SELECT sha256, kind, name FROM document WHERE id = ?", id), 3);
    rows.push_back(row.bytes());
  }
  std::sort(rows.begin(), rows.end());
  rows.erase(std::unique(rows.begin(), rows.end()), rows.end());
  Canonical body;
  body.mark(2).text(plan).text(program);
  Part out{body.bytes(), {}};
  for (const std::string& row : rows) out.bytes += row;
  out.sha256 = sha256(out.bytes);
  return out;
}

const Part& Bodies::setup(Id id) {
  return known(setups_, id, [&] {
    Canonical body;
    add_rows(body, db_.query("SELECT plan, program FROM setup WHERE id = ?", id), 2);
    add_rows(body,
             db_.query("SELECT d.sha256, d.kind, d.name FROM setup_document s JOIN document d ON d.id = s.document "
                       "WHERE s.setup = ? ORDER BY d.sha256",
                       id),
             3);
    return part_of(body);
  });
}

const Part& Bodies::revision(Id id) {
  return known(revisions_, id, [&] {
    return part_of(db_.query("SELECT r.uuid, r.limit_set, r.number, d.sha256 FROM revision r LEFT JOIN document d "
                             "ON d.id = r.document WHERE r.id = ?",
                             id),
                   4);
  });
}

const Part& Bodies::applied(Id id) {
  return known(applied_, id, [&] {
    return part_of(db_.query("SELECT m.step, m.name, m.variant, m.unit, m.about, l.spec_low, l.spec_high, l.nominal, "
                             "l.guard, l.share, l.u_budget, l.u_of_reading, l.width, l.low, l.high, l.reason "
                             "FROM applied_limit l JOIN metric m ON m.id = l.metric WHERE l.applied = ? "
                             "ORDER BY m.step, m.name, m.variant, m.unit, m.about",
                             id),
                   16);
  });
}

const Part& Bodies::equipment(Id id) {
  return known(equipment_, id, [&] {
    return part_of(db_.query("SELECT i.instrument, i.maker, i.model, i.serial, i.firmware FROM equipment_instrument e "
                             "JOIN instrument i ON i.id = e.instrument WHERE e.equipment = ? "
                             "ORDER BY i.instrument, i.maker, i.model, i.serial, i.firmware",
                             id),
                   5);
  });
}

const Part& Bodies::reduction(Id id) {
  return known(reductions_, id, [&] {
    return part_of(db_.query("SELECT kind, version FROM reduction_step WHERE reduction = ? ORDER BY kind", id), 2);
  });
}

/// Short, and named by its content rather than by a hash.
const Part& Bodies::metric(Id id) {
  return known(metric_, id, [&] {
    Canonical body;
    add_rows(body, db_.query("SELECT step, name, variant, unit, about FROM metric WHERE id = ?", id), 5);
    return Part{body.bytes(), {}};
  });
}

const Part& Bodies::station(Id id) {
  return known(stations_, id, [&] { return part_of(db_.query("SELECT uuid, name FROM station WHERE id = ?", id), 2); });
}

std::optional<TrialBody> Bodies::trial(std::string_view uuid, bool check) {
  return read(uuid, check, true);
}

std::optional<TrialBody> Bodies::trial(std::string_view uuid, std::vector<Row> findings) {
  rows_ = std::move(findings);
  key_.clear();
  for (Row& row : rows_) {
    key_.push_back(row.metric);
    for (std::optional<double>* number : {&row.value, &row.u}) {
      if (*number && std::isnan(**number)) number->reset();
      if (*number && **number == 0) *number = 0.0;
    }
  }
  return read(uuid, false, false);
}

std::optional<TrialBody> Bodies::read(std::string_view uuid, bool check, bool findings) {
  Query q = db_.query(
      "SELECT t.id, t.station, b.serial, t.state, t.mark, t.setup, t.revision, t.applied, t.equipment, t.reduction, "
      "t.deciding_metric, t.worst_metric, t.nogo, t.worst_margin, "
      "t.uuid, b.serial, t.nest, t.at_us, t.origin, t.attempt, t.depth, o.name, p.name, t.state, t.took_ms, "
      "t.judgement, t.void_reason, t.ambient_degC, t.unsafe, t.nogo, t.worst_margin, t.purpose, t.adopted "
      "FROM trial t JOIN board b ON b.id = t.board LEFT JOIN product_order o ON o.id = t.ord "
      "LEFT JOIN person p ON p.id = t.operator WHERE t.uuid = ?",
      Blob{uuid});
  if (!q.next()) return std::nullopt;
  TrialBody out;
  out.id = q.integer(0);
  out.station = q.integer(1);
  out.serial = q.text(2);
  out.state = static_cast<TrialState>(q.integer(3));
  out.mark = q.text(4);
  if (findings) read_findings(out.id);
  body_.clear();
  parts_.clear();
  add_columns(body_, q, 14, 33);
  for (const Part* part : {&station(out.station), &setup(q.integer(5)), &revision(q.integer(6)), &applied(q.integer(7)),
                           &equipment(q.integer(8)), &reduction(q.integer(9))})
    name(*part);
  for (int i : {10, 11}) body_.add(q.null(i) ? std::string() : metric(q.integer(i)).bytes);
  const Metrics& set = metrics();
  name(set.part);
  body_.add(static_cast<std::int64_t>(rows_.size()));
  for (std::size_t i : set.order) {
    const Row& row = rows_[i];
    body_.add(row.value).add(row.u).small(row.n).small(row.state).small(row.verdict);
  }
  out.findings = static_cast<std::int64_t>(rows_.size());
  add_readings(out);
  out.sha256 = sha256(body_.bytes());
  if (check) out.misfit = misfit(q.maybe_integer(7), q.integer(12), q.maybe_real(13));
  return out;
}

void Bodies::name(const Part& part) {
  body_.add(part.sha256);
  parts_.push_back(&part);
}

void Bodies::read_findings(Id trial) {
  rows_.clear();
  key_.clear();
  Query q = db_.query("SELECT metric, value, u, n, state, verdict FROM finding WHERE trial = ? ORDER BY metric", trial);
  while (q.next()) {
    rows_.push_back({q.integer(0), q.maybe_real(1), q.maybe_real(2), q.integer(3), q.integer(4), q.integer(5)});
    key_.push_back(rows_.back().metric);
  }
}

const Bodies::Metrics& Bodies::metrics() {
  const auto [at, fresh] = metrics_.try_emplace(key_);
  Metrics& out = at->second;
  if (!fresh) return out;
  out.order.resize(key_.size());
  std::iota(out.order.begin(), out.order.end(), std::size_t{0});
  std::sort(out.order.begin(), out.order.end(),
            [&](std::size_t a, std::size_t b) { return metric(key_[a]).bytes < metric(key_[b]).bytes; });
  for (std::size_t i : out.order) out.part.bytes += metric(key_[i]).bytes;
  out.part.sha256 = sha256(out.part.bytes);
  return out;
}

/// By the hash of the bytes, so that readings may be archived away.
void Bodies::add_readings(TrialBody& trial) {
  Query q = db_.query("SELECT format, body, sha256 FROM reading_blob WHERE trial = ?", trial.id);
  if (!q.next()) return;
  trial.readings = 1;
  trial.readings_kept = !q.null(1);
  body_.integer(q.integer(0)).add(trial.readings_kept ? sha256(q.view(1)) : q.text(2));
}

const std::vector<Bodies::Limited>& Bodies::limits(Id applied) {
  const auto [at, fresh] = limits_.try_emplace(applied);
  if (!fresh) return at->second;
  Query q = db_.query(
      "SELECT metric, nominal, guard, width, low, high FROM applied_limit WHERE applied = ? ORDER BY metric", applied);
  while (q.next()) {
    Limited row{q.integer(0), {}};
    row.limit.nominal = q.real(1);
    row.limit.guard = static_cast<Guard>(q.integer(2));
    row.limit.width = q.real(3);
    row.limit.applied = {q.maybe_real(4), q.maybe_real(5)};
    at->second.push_back(row);
  }
  return at->second;
}

std::string Bodies::misfit(const std::optional<Id>& applied, std::int64_t nogo, std::optional<double> worst) {
  std::int64_t missed = 0;
  std::optional<double> least;
  const auto& limited = limits(applied.value_or(0));
  auto limit = limited.begin();
  for (const Row& row : rows_) {
    if (row.verdict == static_cast<int>(Verdict::missed)) ++missed;
    while (limit != limited.end() && limit->metric < row.metric) ++limit;
    if (limit == limited.end() || limit->metric != row.metric || !row.value) continue;
    if (row.state != static_cast<int>(FindingState::measured)) continue;
    const double left = margin(limit->limit, *row.value);
    if (left < least.value_or(std::numeric_limits<double>::infinity())) least = left;
  }
  if (missed != nogo) return fmt::format("the trial counts {} limits missed, its findings {}", nogo, missed);
  if (least != worst) return "the least margin of the trial is not the least of its findings";
  return {};
}

std::map<Bodies::Id, Bodies::Entry> Bodies::entered(Id first, Id last, const Sink& sink) {
  std::map<Id, Entry> out;
  Canonical row;
  auto take = [&](Query q, char table, int columns, std::int64_t Entry::*count) {
    while (q.next()) {
      const auto entry = out.find(q.integer(0));
      if (entry == out.end()) continue;
      row.clear();
      row.mark(table);
      add_columns(row, q, 1, 1 + columns);
      sink(entry->first, row.bytes());
      if (count != nullptr) ++(entry->second.*count);
    }
  };
  {
    Query q = db_.query("SELECT id FROM entered WHERE id BETWEEN ? AND ?", first, last);
    while (q.next()) out.try_emplace(q.integer(0));
  }
  take(db_.query("SELECT id, uuid, kind, name, who FROM entered WHERE id BETWEEN ? AND ?", first, last), 'e', 4,
       nullptr);
  take(db_.query("SELECT entered, name, product FROM product_order INDEXED BY product_order_entered "
                 "WHERE entered BETWEEN ? AND ? ORDER BY name",
                 first, last),
       'o', 2, &Entry::orders);
  take(db_.query("SELECT d.entered, o.name, d.build_no, b.serial, d.panel FROM build d INDEXED BY build_entered "
                 "CROSS JOIN product_order o ON o.id = d.ord CROSS JOIN board b ON b.id = d.board "
                 "WHERE d.entered BETWEEN ? AND ? ORDER BY o.name, d.build_no",
                 first, last),
       'b', 4, &Entry::builds);
  take(db_.query("SELECT r.entered, r.name, l.maker, l.part, l.lot, r.date_code, r.distributor, r.rereeled, "
                 "r.quantity, r.marking FROM reel r INDEXED BY reel_entered CROSS JOIN lot l ON l.id = r.lot "
                 "WHERE r.entered BETWEEN ? AND ? ORDER BY r.name",
                 first, last),
       'r', 9, &Entry::reels);
  take(db_.query("SELECT f.entered, f.uuid, o.name, f.designator, r.name, f.poss_from, f.cert_from, f.cert_to, "
                 "f.poss_to, f.repair, f.since_us, f.known_us FROM feed f INDEXED BY feed_entered "
                 "CROSS JOIN product_order o ON o.id = f.ord CROSS JOIN reel r ON r.id = f.reel "
                 "WHERE f.entered BETWEEN ? AND ? ORDER BY f.uuid",
                 first, last),
       'f', 11, &Entry::feeds);
  take(db_.query("SELECT dropped_by, uuid, dropped_us FROM feed WHERE dropped_by BETWEEN ? AND ? ORDER BY uuid", first,
                 last),
       'd', 2, &Entry::dropped);
  return out;
}

std::optional<std::string> Bodies::only(Query q, int columns) {
  if (!q.next()) return std::nullopt;
  Canonical body;
  add_columns(body, q, 0, columns);
  return body.bytes();
}

std::optional<std::string> Bodies::epoch_begun(std::string_view uuid) {
  return only(db_.query("SELECT uuid, reason, who, last_epoch, last_seq, last_hash FROM epoch_begun WHERE uuid = ?",
                        Blob{uuid}),
              6);
}

std::optional<std::string> Bodies::archived(std::string_view uuid) {
  return only(
      db_.query("SELECT uuid, who, before_us, trials, bytes, name, sha256 FROM archived WHERE uuid = ?", Blob{uuid}),
      7);
}

std::optional<std::string> Bodies::act(std::string_view uuid) {
  Query q = db_.query("SELECT id, uuid, kind, at_us, who, second, reason, about, ends, trial FROM act WHERE uuid = ?",
                      Blob{uuid});
  if (!q.next()) return std::nullopt;
  Canonical body;
  add_columns(body, q, 1, 10);
  Query boards = db_.query(
      "SELECT b.serial, a.attempts FROM act_board a JOIN board b ON b.id = a.board WHERE a.act = ? "
      "ORDER BY b.serial",
      q.integer(0));
  while (boards.next()) add_columns(body.mark('b'), boards, 0, 2);
  Query values = db_.query("SELECT key, value FROM act_value WHERE act = ? ORDER BY key", q.integer(0));
  while (values.next()) add_columns(body.mark('v'), values, 0, 2);
  return body.bytes();
}

void Bodies::forget() {
  for (Known* held : {&setups_, &revisions_, &applied_, &equipment_, &reductions_, &metric_, &stations_}) held->clear();
  metrics_.clear();
  limits_.clear();
  parts_.clear();
}

}  // namespace jigwright
