#include "station/jig_check_text.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

#include "base/error.hpp"
#include "station/words.hpp"

namespace jigwright {
namespace {

bool bad(const FindingRow& row) {
  const Verdict v = row.judged.verdict;
  return v == Verdict::missed || v == Verdict::invalid || v == Verdict::unsure;
}

std::string_view word(PartVerdict verdict) {
  return verdict == PartVerdict::met ? "met" : verdict == PartVerdict::failed ? "NOT MET" : "IN DOUBT";
}

/// Less room first; a margin that can't be told after the ones that can.
bool tighter(const FindingRow& a, const FindingRow& b) {
  if (std::isnan(a.judged.margin)) return false;
  return std::isnan(b.judged.margin) || a.judged.margin < b.judged.margin;
}

std::string line(const FindingRow& row, std::size_t of) {
  const std::string more = of > 1 ? fmt::format(" and {} more", of - 1) : "";
  return fmt::format("  {} {:<58} {:>12}   {:<28} {}{}\n", bad(row) ? '!' : ' ', printable(label(row.metric.name)),
                     value_text(row.judged.finding, row.metric.unit),
                     bounds_text(row.limit ? &*row.limit : nullptr, row.metric.unit), word(row.judged.verdict), more);
}

/// The rows of one step and metric: those at fault, or else the tightest of those that were read and have a limit.
std::string lines(const std::vector<const FindingRow*>& rows) {
  std::string out;
  const FindingRow* least = nullptr;
  std::size_t met = 0;
  for (const FindingRow* row : rows) {
    if (bad(*row)) out += line(*row, 1);
    if (row->judged.verdict != Verdict::met) continue;
    ++met;
    if (least == nullptr || tighter(*row, *least)) least = row;
  }
  if (least != nullptr) out += line(*least, met);
  return out;
}

std::string findings(const TrialEnd& end) {
  std::string out;
  std::vector<const FindingRow*> together;
  for (std::size_t i = 0; i < end.findings.size(); ++i) {
    const MetricName& name = end.findings[i].metric.name;
    const bool first = std::none_of(
        end.findings.begin(), end.findings.begin() + static_cast<std::ptrdiff_t>(i),
        [&](const FindingRow& r) { return r.metric.name.step == name.step && r.metric.name.name == name.name; });
    if (!first) continue;
    together.clear();
    for (const FindingRow& row : end.findings)
      if (row.metric.name.step == name.step && row.metric.name.name == name.name) together.push_back(&row);
    out += lines(together);
  }
  return out;
}

std::string next_action(const CheckedPart& part) {
  if (part.says.verdict == PartVerdict::met) return {};
  for (const FindingRow& row : part.end->findings) {
    if (!bad(row)) continue;
    for (const auto& step : part.plan->plan.steps)
      if (step->id == row.metric.name.step) return step->next_action;
  }
  return {};
}

}  // namespace

PartVerdict verdict_of(const std::vector<CheckedPart>& parts) {
  PartVerdict all = PartVerdict::met;
  for (const CheckedPart& part : parts) {
    if (part.end && part.says.verdict == PartVerdict::failed) return PartVerdict::failed;
    if (!part.end || part.says.verdict != PartVerdict::met) all = PartVerdict::in_doubt;
  }
  return parts.empty() ? PartVerdict::in_doubt : all;
}

std::string render(const std::vector<CheckedPart>& parts, const std::vector<std::string>& untold) {
  std::string out;
  for (const CheckedPart& part : parts) {
    const std::string title = printable(part.plan->plan.title.empty() ? part.plan->plan.id : part.plan->plan.title);
    if (!part.end) {
      out += fmt::format("{}: not tried{}\n", title, part.says.why.empty() ? "" : ", " + printable(part.says.why));
      continue;
    }
    out += fmt::format("{}: {}  ({} {}, {:.1f} s)\n", title, word(part.says.verdict),
                       printable(part.plan->plan.check.serial), word(part.end->outcome.judgement),
                       static_cast<double>(part.end->took_ms) / 1e3);
    out += findings(*part.end);
    if (!part.says.why.empty()) out += "    " + printable(part.says.why) + "\n";
    if (!part.end->safe_state.empty())
      out += "    NOT CONFIRMED SAFE, keep the lid closed: " + printable(part.end->safe_state) + "\n";
    if (const std::string next = next_action(part); !next.empty()) out += "    next: " + printable(next) + "\n";
  }
  if (!untold.empty()) out += "No reading tells:";
  for (std::size_t i = 0; i < untold.size(); ++i) out += (i == 0 ? " " : "; ") + printable(untold[i]);
  if (!untold.empty()) out += "\n";
  const PartVerdict all = verdict_of(parts);
  return out + (all == PartVerdict::met ? "JIG OK\n" : "JIG NOT OK\n");
}

}  // namespace jigwright
