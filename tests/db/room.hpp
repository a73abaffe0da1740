// What the store's tests share: a folder of their own, and trials made of literals.
#pragma once
#include <doctest/doctest.h>

#include <cstdlib>
#include <filesystem>
#include <memory>
#include <string>

#include "db/store.hpp"

namespace jigwright::room {

struct TempFolder {
  std::filesystem::path path;
  TempFolder() {
    std::string pattern = (std::filesystem::temp_directory_path() / "jigwright-test-XXXXXX").string();
    REQUIRE(mkdtemp(pattern.data()) != nullptr);
    path = pattern;
  }
  ~TempFolder() {
    std::error_code ignored;
    std::filesystem::remove_all(path, ignored);
  }
  TempFolder(const TempFolder&) = delete;
  TempFolder& operator=(const TempFolder&) = delete;
  std::string file(const std::string& name) const { return (path / name).string(); }
};

inline std::unique_ptr<Store> open(const std::string& path, const StoreOptions& options = {}) {
  auto store = Store::open(path, options);
  if (!store) FAIL(describe(store.error()));
  return std::move(store.value());
}
inline std::unique_ptr<Store> memory() {
  return open(":memory:");
}

template <class T>
T must(Result<T> result) {
  if (!result) FAIL(describe(result.error()));
  return std::move(result.value());
}

inline constexpr std::int64_t noon_us = 1'767'960'000'000'000;  ///< 2026-01-09T12:00:00Z

inline TrialStart start(const std::string& serial, std::int64_t at_us = noon_us) {
  TrialStart s;
  s.serial = serial;
  s.order = "WO-1";
  s.station = "bench 1";
  s.at_us = at_us;
  s.origin = Origin::simulated;
  s.operator_name = "A. Tester";
  s.program = "jigwright 0.1.0";
  s.depth = "full";
  s.documents = {{"plan", "plan.toml", "[plan]"}, {"limits", "limits.toml", "[limits]"}};
  s.plan = "plan-1";
  s.limit_set = "limits-1";
  s.limit_revision = 3;
  return s;
}

/// A voltage with a limit of -0.48 mV to 0.48 mV (specification +/- 0.5 mV less 20 uV).
inline FindingRow offset_row(const std::string& variant, double value_V, Verdict verdict) {
  FindingRow row;
  row.metric.name = {"offset", "offset", variant};
  row.metric.unit = Unit::volt;
  Limit limit;
  limit.specification = {-0.5e-3, 0.5e-3};
  limit.nominal = 0;
  limit.budget_U = limit.width = 20e-6;
  limit.applied = {-0.48e-3, 0.48e-3};
  row.limit = limit;
  row.judged.finding = {0, value_V, 4e-6, 10, FindingState::measured};
  row.judged.verdict = verdict;
  row.judged.margin = margin(limit, value_V);
  return row;
}

inline TrialEnd end(Judgement judgement, double offset_V = 0.1e-3) {
  TrialEnd e;
  e.took_ms = 2200;
  e.outcome.judgement = judgement;
  if (judgement == Judgement::no_go) e.outcome.deciding = 0;
  if (judgement == Judgement::void_) e.outcome.void_reason = "the lid was opened";
  e.findings = {offset_row("x1", offset_V, judgement == Judgement::no_go ? Verdict::missed : Verdict::met),
                offset_row("x10", 0.2e-3, Verdict::met)};
  FindingRow recorded;
  recorded.metric.name = {"known", "zero", ""};
  recorded.metric.unit = Unit::volt;
  recorded.metric.about = About::jig;
  recorded.judged.finding = {2, 1.5e-6, std::numeric_limits<double>::quiet_NaN(), 3, FindingState::measured};
  recorded.judged.verdict = Verdict::recorded;
  e.findings.push_back(recorded);
  e.instruments = {{"meter", "Alder Works", "M6", "0001", "1.0"}};
  e.reduce_versions = {{"offset", 1}, {"known-value", 2}};
  e.ambient_C = 23.5;
  e.readings = std::string("\x01\x00\x7f", 3);
  return e;
}

inline OpenTrial try_board(Store& store, const std::string& serial, Judgement judgement, std::int64_t at_us = noon_us) {
  const OpenTrial open = must(store.begin_trial(start(serial, at_us)));
  must(store.finish_trial(open, end(judgement, judgement == Judgement::no_go ? 0.6e-3 : 0.1e-3)));
  return open;
}

}  // namespace jigwright::room
