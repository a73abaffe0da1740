#include "db/bodies.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <numeric>

#include "limits/judge.hpp"

namespace jigwright {
namespace {

/// Columns [from, to) of the row, each by its type and value.
void add_columns(Canonical& body, const Query& q, int from, int to) {
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

std::string only(Query q, int columns) {
  Canonical body;
  add_rows(body, std::move(q), columns);
  return sha256(body.bytes());
}

}  // namespace

template <class Read>
const std::string& Bodies::known(Known& held, Id id, Read read) {
  const auto [at, fresh] = held.try_emplace(id);
  if (fresh) at->second = read();
  return at->second;
}

const std::string& Bodies::setup(Id id) {
  return known(setups_, id, [&] {
    Canonical body;
    add_rows(body, db_.query("SELECT sha256, plan, program FROM setup WHERE id = ?", id), 3);
    add_rows(body,
             db_.query("SELECT d.sha256, d.kind, d.name FROM setup_document s JOIN document d ON d.id = s.document "
                       "WHERE s.setup = ? ORDER BY d.sha256",
                       id),
             3);
    return sha256(body.bytes());
  });
}

const std::string& Bodies::revision(Id id) {
  return known(revisions_, id, [&] {
    return only(db_.query("SELECT r.uuid, r.limit_set, r.number, d.sha256 FROM revision r LEFT JOIN document d "
                          "ON d.id = r.document WHERE r.id = ?",
                          id),
                4);
  });
}

const std::string& Bodies::applied(Id id) {
  return known(applied_, id, [&] {
    Canonical body;
    add_rows(body, db_.query("SELECT sha256 FROM applied WHERE id = ?", id), 1);
    add_rows(body,
             db_.query("SELECT m.step, m.name, m.variant, m.unit, m.about, l.spec_low, l.spec_high, l.nominal, "
                       "l.guard, l.share, l.u_budget, l.u_of_reading, l.width, l.low, l.high, l.reason "
                       "FROM applied_limit l JOIN metric m ON m.id = l.metric WHERE l.applied = ? "
                       "ORDER BY m.step, m.name, m.variant, m.unit, m.about",
                       id),
             16);
    return sha256(body.bytes());
  });
}

const std::string& Bodies::equipment(Id id) {
  return known(equipment_, id, [&] {
    Canonical body;
    add_rows(body, db_.query("SELECT sha256 FROM equipment WHERE id = ?", id), 1);
    add_rows(body,
             db_.query("SELECT i.instrument, i.maker, i.model, i.serial, i.firmware FROM equipment_instrument e "
                       "JOIN instrument i ON i.id = e.instrument WHERE e.equipment = ? "
                       "ORDER BY i.instrument, i.maker, i.model, i.serial, i.firmware",
                       id),
             5);
    return sha256(body.bytes());
  });
}

const std::string& Bodies::reduction(Id id) {
  return known(reductions_, id, [&] {
    Canonical body;
    add_rows(body, db_.query("SELECT sha256 FROM reduction WHERE id = ?", id), 1);
    add_rows(body, db_.query("SELECT kind, version FROM reduction_step WHERE reduction = ? ORDER BY kind", id), 2);
    return sha256(body.bytes());
  });
}

/// The metric's content itself: short, and sorted by.
const std::string& Bodies::metric(Id id) {
  return known(metric_, id, [&] {
    Canonical body;
    add_rows(body, db_.query("SELECT step, name, variant, unit, about FROM metric WHERE id = ?", id), 5);
    return body.bytes();
  });
}

const std::string& Bodies::station(Id id) {
  return known(stations_, id, [&] { return only(db_.query("SELECT uuid, name FROM station WHERE id = ?", id), 2); });
}

std::optional<TrialBody> Bodies::begun(std::string_view uuid) {
  Query q = db_.query(
      "SELECT t.id, t.station, t.state, t.setup, t.revision, "
      "t.uuid, b.serial, t.nest, t.at_us, t.origin, t.attempt, t.depth, o.name, p.name, "
      "t.state = 0 AND t.judgement = 2 AND t.void_reason = 'the program ended in mid-trial' AND t.nogo = 0 AND "
      "coalesce(t.took_ms, t.applied, t.equipment, t.reduction, t.ambient_degC, t.unsafe, t.deciding_metric, "
      "t.worst_metric, t.worst_margin) IS NULL "
      "FROM trial t JOIN board b ON b.id = t.board LEFT JOIN product_order o ON o.id = t.ord "
      "LEFT JOIN person p ON p.id = t.operator WHERE t.uuid = ?",
      Blob{uuid});
  if (!q.next()) return std::nullopt;
  TrialBody out{q.integer(0), q.integer(1), q.text(6), q.integer(2) == 0, q.integer(14) != 0, {}, 0, 0, {}};
  body_.clear();
  add_columns(body_, q, 5, 14);
  body_.add(station(out.station)).add(setup(q.integer(3))).add(revision(q.integer(4)));
  out.sha256 = sha256(body_.bytes());
  return out;
}

std::optional<TrialBody> Bodies::ended(std::string_view uuid, bool check) {
  return ended(uuid, check, true);
}

std::optional<TrialBody> Bodies::ended(std::string_view uuid, std::vector<Row> findings) {
  rows_ = std::move(findings);
  key_.clear();
  for (Row& row : rows_) {
    key_.push_back(row.metric);
    for (std::optional<double>* number : {&row.value, &row.u}) {
      if (*number && std::isnan(**number)) number->reset();
      if (*number && **number == 0) *number = 0.0;
    }
  }
  return ended(uuid, false, false);
}

std::optional<TrialBody> Bodies::ended(std::string_view uuid, bool check, bool read) {
  Query q = db_.query(
      "SELECT t.id, t.station, b.serial, t.state, t.applied, t.equipment, t.reduction, t.deciding_metric, "
      "t.worst_metric, t.nogo, t.worst_margin, "
      "t.uuid, t.state, t.took_ms, t.judgement, t.void_reason, t.ambient_degC, t.unsafe, t.nogo, t.worst_margin "
      "FROM trial t JOIN board b ON b.id = t.board WHERE t.uuid = ?",
      Blob{uuid});
  if (!q.next()) return std::nullopt;
  TrialBody out{q.integer(0), q.integer(1), q.text(2), q.integer(3) == 0, false, {}, 0, 0, {}};
  if (read) read_findings(out.id);
  body_.clear();
  add_columns(body_, q, 11, 20);
  body_.add(applied(q.integer(4))).add(equipment(q.integer(5))).add(reduction(q.integer(6)));
  for (int i : {7, 8}) body_.mark(q.null(i) ? 0 : 1).add(q.null(i) ? std::string() : metric(q.integer(i)));
  const Metrics& set = metrics();
  body_.add(set.sha256).add(static_cast<std::int64_t>(rows_.size()));
  for (std::size_t i : set.order) {
    const Row& row = rows_[i];
    body_.add(row.value).add(row.u).add(row.n).add(row.state).add(row.verdict);
  }
  out.findings = static_cast<std::int64_t>(rows_.size());
  out.readings = add_readings(out.id);
  out.sha256 = sha256(body_.bytes());
  if (check) out.misfit = misfit(q.maybe_integer(4), q.integer(9), q.maybe_real(10));
  return out;
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
            [&](std::size_t a, std::size_t b) { return metric(key_[a]) < metric(key_[b]); });
  Canonical body;
  for (std::size_t i : out.order) body.add(metric(key_[i]));
  out.sha256 = sha256(body.bytes());
  return out;
}

/// By the hash of the bytes, so that readings may be archived away.
std::int64_t Bodies::add_readings(Id trial) {
  Query q = db_.query("SELECT format, body FROM reading_blob WHERE trial = ?", trial);
  if (!q.next()) return 0;
  add_columns(body_, q, 0, 1);
  body_.add(sha256(q.view(1)));
  return 1;
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

std::map<std::int64_t, Bodies::Entry> Bodies::entered(std::int64_t from_id) {
  std::map<Id, Entry> out;
  std::map<Id, Sha256> hashes;
  auto take = [&](Query q, char table, int columns, std::int64_t Entry::*count) {
    while (q.next()) {
      const auto entry = out.find(q.integer(0));
      if (entry == out.end()) continue;
      body_.clear();
      body_.mark(table);
      add_columns(body_, q, 1, 1 + columns);
      hashes[entry->first].add(body_.bytes());
      if (count != nullptr) ++(entry->second.*count);
    }
  };
  {
    Query q = db_.query("SELECT id FROM entered WHERE id >= ?", from_id);
    while (q.next()) out.try_emplace(q.integer(0));
  }
  take(db_.query("SELECT id, uuid, kind, name, who FROM entered WHERE id >= ?", from_id), 'e', 4, nullptr);
  take(db_.query("SELECT entered, name, product FROM product_order INDEXED BY product_order_entered "
                 "WHERE entered >= ? ORDER BY name",
                 from_id),
       'o', 2, &Entry::orders);
  take(db_.query("SELECT d.entered, o.name, d.build_no, b.serial, d.panel FROM build d INDEXED BY build_entered "
                 "CROSS JOIN product_order o ON o.id = d.ord CROSS JOIN board b ON b.id = d.board "
                 "WHERE d.entered >= ? ORDER BY o.name, d.build_no",
                 from_id),
       'b', 4, &Entry::builds);
  take(db_.query("SELECT r.entered, r.name, l.maker, l.part, l.lot, r.date_code, r.distributor, r.rereeled, "
                 "r.quantity, r.marking FROM reel r INDEXED BY reel_entered CROSS JOIN lot l ON l.id = r.lot "
                 "WHERE r.entered >= ? ORDER BY r.name",
                 from_id),
       'r', 9, &Entry::reels);
  take(db_.query("SELECT f.entered, f.uuid, o.name, f.designator, r.name, f.poss_from, f.cert_from, f.cert_to, "
                 "f.poss_to, f.repair, f.since_us, f.known_us FROM feed f INDEXED BY feed_entered "
                 "CROSS JOIN product_order o ON o.id = f.ord CROSS JOIN reel r ON r.id = f.reel "
                 "WHERE f.entered >= ? ORDER BY f.uuid",
                 from_id),
       'f', 11, &Entry::feeds);
  for (auto& [id, hash] : hashes) out[id].sha256 = hash.digest();
  return out;
}

void Bodies::forget() {
  for (Known* held : {&setups_, &revisions_, &applied_, &equipment_, &reductions_, &metric_, &stations_}) held->clear();
  metrics_.clear();
  limits_.clear();
}

}  // namespace jigwright
