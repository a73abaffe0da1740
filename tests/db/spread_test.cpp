#include "db/spread.hpp"

#include "db/columns.hpp"
#include "db/sqlite.hpp"
#include "tests/db/room.hpp"

using namespace jigwright;
using room::must;

namespace {

constexpr double none = std::numeric_limits<double>::quiet_NaN();

/// One trial whose "offset: offset (x1)" is this; none = not in the trial at all.
void log(Store& store, const std::string& serial, std::optional<double> value_V,
         FindingState state = FindingState::measured, Verdict verdict = Verdict::met) {
  TrialEnd end = room::end(Judgement::go);
  end.findings[0].judged.finding.value = value_V.value_or(0);
  end.findings[0].judged.finding.state = state;
  end.findings[0].judged.verdict = verdict;
  end.findings[0].judged.margin = none;
  if (!value_V) end.findings.erase(end.findings.begin());
  must(store.finish_trial(must(store.begin_trial(room::start(serial))), end));
}

Spread one(Store& store, bool all_trials = false) {
  auto answer = must(spread(store.database(), {"offset", "offset", "x1", all_trials}));
  REQUIRE(answer.size() == 1);
  return answer[0];
}

}  // namespace

TEST_CASE("counts, ends, median, mean and deviation of a few first findings") {
  const auto store = room::memory();
  // 2, 4, 4, 4, 5, 5, 7, 9 uV: mean 5, sum of squares about it 32, so the deviation is the root of 32/7.
  const double values_uV[] = {2, 4, 4, 4, 5, 5, 7, 9};
  for (int i = 0; i < 8; ++i) log(*store, "TB-0" + std::to_string(i), values_uV[i] * 1e-6);
  log(*store, "TB-08", none, FindingState::no_data, Verdict::invalid);
  log(*store, "TB-09", 1.0, FindingState::over_range, Verdict::missed);
  const Spread s = one(*store);
  CHECK(s.findings == 10);
  CHECK(s.measured == 8);
  CHECK(s.missed == 1);
  CHECK(s.quantiles.front() == 2e-6);
  CHECK(s.quantiles[4] == doctest::Approx(4.5e-6));
  CHECK(s.quantiles.back() == 9e-6);
  CHECK(s.summary.mean == doctest::Approx(5e-6));
  CHECK(s.summary.sd == doctest::Approx(std::sqrt(32.0 / 7) * 1e-6));
  REQUIRE(s.limit.has_value());
  CHECK(s.limit->applied.high == 0.48e-3);
  CHECK(s.limit->specification.low == -0.5e-3);
}

TEST_CASE("a board counts once, by the first trial that found the metric") {
  const auto store = room::memory();
  log(*store, "TB-01", 1e-6);
  log(*store, "TB-02", std::nullopt);  // a plan without it
  log(*store, "TB-01", 2e-6);
  log(*store, "TB-02", 3e-6);
  log(*store, "TB-02", 4e-6);
  const Spread first = one(*store), all = one(*store, true);
  CHECK(first.findings == 2);
  CHECK(first.quantiles.front() == 1e-6);
  CHECK(first.quantiles.back() == 3e-6);
  CHECK(all.findings == 4);
  CHECK(all.quantiles.back() == 4e-6);
}

TEST_CASE("the answer is the same from blocks and from rows") {
  const auto store = room::memory();
  for (int i = 0; i < 1100; ++i) {
    if (i % 11 == 0)
      log(*store, "TB-" + std::to_string(i % 500), std::nullopt);
    else
      log(*store, "TB-" + std::to_string(i % 500), (i * 37 % 101) * 1e-6);
  }
  const Spread rows = one(*store);
  CHECK(must(ColumnKeeper(store->database()).upkeep(10)) == 2);
  const Spread blocks = one(*store);
  CHECK(rows.findings == 500);  // trial i is without it for each eleventh i, and 500 is no multiple of eleven
  CHECK(blocks.findings == rows.findings);
  CHECK(blocks.quantiles == rows.quantiles);
  CHECK(blocks.summary.sd == rows.summary.sd);
}

TEST_CASE("without a variant each has its line, and the limits are those of the latest trial") {
  const auto store = room::memory();
  log(*store, "TB-01", 1e-6);
  TrialEnd end = room::end(Judgement::go);
  end.findings[0].limit->applied.high = 0.3e-3;
  end.findings[1].limit.reset();
  must(store->finish_trial(must(store->begin_trial(room::start("TB-01"))), end));
  const auto answer = must(spread(store->database(), {"offset", "offset", {}, false}));
  REQUIRE(answer.size() == 2);
  CHECK(answer[0].metric.metric.name.variant == "x1");
  CHECK(answer[0].limit->applied.high == 0.3e-3);
  CHECK(answer[1].metric.metric.name.variant == "x10");
  CHECK(!answer[1].limit.has_value());
}

TEST_CASE("nothing measured gives counts and no numbers") {
  const auto store = room::memory();
  log(*store, "TB-01", none, FindingState::no_data, Verdict::invalid);
  const Spread s = one(*store);
  CHECK(s.findings == 1);
  CHECK(s.measured == 0);
  for (const double q : s.quantiles) CHECK(std::isnan(q));
}

TEST_CASE("rows come metric by metric, with serial and stamp") {
  const auto store = room::memory();
  log(*store, "TB-01", 1e-6);
  log(*store, "TB-02", none, FindingState::no_data, Verdict::invalid);
  log(*store, "TB-01", 2e-6);
  std::vector<std::string> got;
  must(each_spread_row(store->database(), {"offset", "offset", "x1", false},
                       [&](const KnownMetric& metric, const SpreadRow& row) {
                         CHECK(metric.metric.unit == Unit::volt);
                         CHECK(row.at_us == room::noon_us);
                         got.push_back(row.serial + (std::isnan(row.value) ? " none" : " value"));
                       }));
  CHECK(got == std::vector<std::string>{"TB-01 value", "TB-02 none"});
}
