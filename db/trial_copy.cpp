#include "db/trial_copy.hpp"

#include <algorithm>
#include <limits>

#include "db/canonical.hpp"
#include "db/digest.hpp"

namespace jigwright {
namespace {

constexpr double nan = std::numeric_limits<double>::quiet_NaN();

bool same_metric(const Metric& a, const Metric& b) {
  return a.name == b.name && a.unit == b.unit && a.about == b.about;
}

/// Reads one trial's body and the parts that it names.
class Reading {
 public:
  Reading(const RecordCopy& record, const CopySet& copies) : record_(record), copies_(copies), body_(record.body) {}

  std::optional<TrialCopy> trial() {
    read_row();
    read_parts();
    read_metrics();
    read_findings();
    read_limits();
    read_readings();
    if (failed_ || body_.failed() || !body_.at_end()) return std::nullopt;
    return std::move(out_);
  }

 private:
  std::string_view part() {
    const auto found = copies_.parts.find(std::string(body_.text()));
    if (found == copies_.parts.end()) failed_ = true;
    return failed_ ? std::string_view() : std::string_view(found->second);
  }

  /// Calls `row` for each row of a part, which must have so many columns.
  template <class Row>
  void rows(std::string_view bytes, char columns, Row row) {
    CanonicalReader reader(bytes);
    while (!failed_ && !reader.at_end()) {
      if (reader.mark() != columns) reader.fail();
      row(reader);
      failed_ = failed_ || reader.failed();
    }
  }

  Metric metric(CanonicalReader& r) {
    Metric out;
    out.name.step = r.text_column();
    out.name.name = r.text_column();
    out.name.variant = r.text_column();
    const auto unit = unit_of(r.text_column());
    if (unit) out.unit = unit.value();
    if (!unit) failed_ = true;
    out.about = static_cast<About>(r.integer_column());
    return out;
  }

  void read_row() {
    if (const auto uuid = uuid_from_bytes(body_.blob_column())) out_.uuid = *uuid;
    TrialStart& start = out_.start;
    start.serial = body_.text_column();
    start.nest = static_cast<int>(body_.integer_column());
    start.at_us = body_.integer_column();
    start.origin = static_cast<Origin>(body_.integer_column());
    out_.attempt = static_cast<int>(body_.integer_column());
    start.depth = body_.text_column();
    start.order = body_.text_column();
    start.operator_name = body_.text_column();
    out_.state = static_cast<TrialState>(body_.integer_column());
    TrialEnd& end = out_.end;
    end.at_us = record_.at_us;
    end.took_ms = body_.maybe_integer_column().value_or(0);
    end.outcome.judgement = static_cast<Judgement>(body_.integer_column());
    end.outcome.void_reason = body_.text_column();
    end.ambient_C = body_.maybe_real_column();
    end.safe_state = body_.text_column();
    out_.missed = static_cast<int>(body_.integer_column());
    out_.worst_margin = body_.maybe_real_column();
    start.purpose = static_cast<Purpose>(body_.integer_column());
    start.adopted = body_.maybe_integer_column();
    if (bytes(out_.uuid) != record_.uuid || out_.state == TrialState::open) failed_ = true;
  }

  void read_parts() {
    rows(part(), 2, [&](CanonicalReader& r) {
      out_.station_uuid = r.blob_column();
      out_.start.station = r.text_column();
    });
    read_setup(part());
    rows(part(), 4, [&](CanonicalReader& r) {
      out_.revision_uuid = r.blob_column();
      out_.start.limit_set = r.text_column();
      out_.start.limit_revision = r.integer_column();
      const std::string document = r.blob_column();
      if (!document.empty()) out_.revision_document = document;
    });
    limits_ = part();
    rows(part(), 5, [&](CanonicalReader& r) {
      InstrumentIdentity i;
      for (std::string* field : {&i.instrument, &i.maker, &i.model, &i.serial, &i.firmware}) *field = r.text_column();
      out_.end.instruments.push_back(std::move(i));
    });
    rows(part(), 2, [&](CanonicalReader& r) {
      std::string kind = r.text_column();
      out_.end.reduce_versions.emplace_back(std::move(kind), static_cast<int>(r.integer_column()));
    });
    deciding_ = body_.text();
    worst_ = body_.text();
  }

  /// The first row has the plan and the program, the others a document each.
  void read_setup(std::string_view bytes) {
    CanonicalReader r(bytes);
    if (r.mark() != 2) r.fail();
    out_.start.plan = r.text_column();
    out_.start.program = r.text_column();
    while (!r.at_end()) {
      if (r.mark() != 3) r.fail();
      const auto found = copies_.documents.find(r.blob_column());
      Document document;
      document.kind = r.text_column();
      document.name = r.text_column();
      if (found == copies_.documents.end()) failed_ = true;
      if (!failed_) document.text = found->second.text;
      out_.start.documents.push_back(std::move(document));
    }
    failed_ = failed_ || r.failed();
  }

  void read_metrics() {
    std::string_view bytes = part();
    rows(bytes, 5, [&](CanonicalReader& r) {
      FindingRow row;
      row.metric = metric(r);
      out_.end.findings.push_back(std::move(row));
    });
    out_.end.outcome.deciding = index_of(deciding_);
    out_.worst = index_of(worst_);
  }

  /// Index of the metric whose row this is; -1 for an empty one.
  int index_of(std::string_view bytes) {
    int out = -1;
    rows(bytes, 5, [&](CanonicalReader& r) {
      const Metric wanted = metric(r);
      const auto& all = out_.end.findings;
      const auto found =
          std::find_if(all.begin(), all.end(), [&](const FindingRow& row) { return same_metric(row.metric, wanted); });
      if (found == all.end()) failed_ = true;
      out = static_cast<int>(found - all.begin());
    });
    return out;
  }

  void read_findings() {
    if (body_.integer() != static_cast<std::int64_t>(out_.end.findings.size())) failed_ = true;
    for (std::size_t i = 0; i < out_.end.findings.size() && !failed_ && !body_.failed(); ++i) {
      Judged& judged = out_.end.findings[i].judged;
      judged.finding.metric = static_cast<int>(i);
      judged.finding.value = body_.maybe_real().value_or(nan);
      judged.finding.u = body_.maybe_real().value_or(nan);
      judged.finding.n = static_cast<int>(body_.small());
      judged.finding.state = static_cast<FindingState>(body_.small());
      judged.verdict = static_cast<Verdict>(body_.small());
    }
  }

  void read_limits() {
    rows(limits_, 16, [&](CanonicalReader& r) {
      const Metric of = metric(r);
      Limit l;
      l.specification.low = r.maybe_real_column();
      l.specification.high = r.maybe_real_column();
      l.nominal = r.maybe_real_column().value_or(nan);
      l.guard = static_cast<Guard>(r.integer_column());
      for (double* field : {&l.share, &l.budget_U, &l.budget_of_reading, &l.width})
        *field = r.maybe_real_column().value_or(nan);
      l.applied.low = r.maybe_real_column();
      l.applied.high = r.maybe_real_column();
      l.reason = r.text_column();
      auto& all = out_.end.findings;
      const auto found =
          std::find_if(all.begin(), all.end(), [&](const FindingRow& row) { return same_metric(row.metric, of); });
      found == all.end() ? void(failed_ = true) : void(found->limit = l);
    });
  }

  void read_readings() {
    if (body_.at_end()) return void(out_.end.readings_format = 0);
    out_.end.readings_format = static_cast<int>(body_.integer_column());
    const std::string_view hash = body_.text();
    out_.end.readings = record_.readings;
    if (sha256(out_.end.readings) == hash) return;
    out_.archived_sha256 = hash;
    if (!out_.end.readings.empty()) failed_ = true;  // not archived away, but not what was recorded
  }

  const RecordCopy& record_;
  const CopySet& copies_;
  CanonicalReader body_;
  TrialCopy out_;
  std::string_view limits_, deciding_, worst_;
  bool failed_{false};
};

}  // namespace

std::optional<TrialCopy> trial_copy(const RecordCopy& record, const CopySet& copies) {
  return Reading(record, copies).trial();
}

}  // namespace jigwright
