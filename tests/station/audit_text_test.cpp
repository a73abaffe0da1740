#include "station/audit_text.hpp"

#include <doctest/doctest.h>

using namespace jigwright;

namespace {

constexpr std::int64_t noon_us = 1'767'960'000'000'000;  // 2026-01-09T12:00:00Z

AuditReport whole() {
  AuditReport report;
  report.records = 3;
  report.trials = 1;
  report.lists = 1;
  report.findings = 40;
  report.heads = {{"bench 1", 1, 3, noon_us, std::string(32, '\xab')}};
  return report;
}

AuditReport differing() {
  AuditReport report = whole();
  report.found = 2;
  report.differences = {{"5 reels in the store, 4 recorded", {}, {}, {}, 0, 0},
                        {"the rows are not what was recorded", "trial", "TB3-0001", "bench 1", 1, 3}};
  return report;
}

}  // namespace

TEST_CASE("the page of a whole store says so and ends with each chain's head") {
  CHECK(render(whole(), "results.db", false) ==
        "results.db: whole. Every record is as it was made.\n"
        "Checked: 3 records (1 trial, 1 list, 0 acts), 40 findings, the file, its schema.\n"
        "Note this elsewhere: a chain that is cut off later, rows and all, shows only beside it.\n"
        "  station bench 1, epoch 1, record 3, 2026-01-09T12:00:00Z:\n"
        "    abababababababababababababababababababababababababababababababab\n");
}

TEST_CASE("the page of a store that differs names the first record that does, then everything") {
  const std::string page = render(differing(), "results.db", false);
  CHECK(page.starts_with("results.db: NOT as recorded: 2 differences.\n"));
  CHECK(page.find("The first record that differs:\n"
                  "  trial of TB3-0001 (station bench 1, epoch 1, record 3): the rows are not what was recorded\n"
                  "All that was found:\n"
                  "  5 reels in the store, 4 recorded\n") != std::string::npos);
  CHECK(page.find("Its chains end so; compare with what was noted elsewhere:\n") != std::string::npos);
}

TEST_CASE("a page lists so many differences and counts the rest") {
  AuditReport report = differing();
  report.found = 1002;
  CHECK(render(report, "results.db", false).find("  and 1000 more\n") != std::string::npos);
}

TEST_CASE("clocks that were set back are mentioned, and are no difference") {
  AuditReport report = whole();
  report.steps_back = 1;
  const std::string page = render(report, "results.db", false);
  CHECK(page.starts_with("results.db: whole."));
  CHECK(page.find("1 record bears a stamp before the one before: a clock was set back.") != std::string::npos);
}

TEST_CASE("an empty store has no head to note") {
  CHECK(render(AuditReport{}, "results.db", false).ends_with("It holds no record yet.\n"));
}

TEST_CASE("as JSON, a difference without a record has nulls in its place") {
  const std::string json = render(differing(), "results.db", true);
  CHECK(json.find("\"whole\": false") != std::string::npos);
  CHECK(json.find("\"record\": null,\n      \"on\": null,\n      \"station\": null,\n      \"epoch\": null") !=
        std::string::npos);
  CHECK(json.find("\"seq\": 3") != std::string::npos);
}

TEST_CASE("the log is aligned, and nothing in it drives a terminal") {
  const std::vector<LogLine> log = {{"bench 1", 1, 9, noon_us, "", "boards entered", "boards.csv"},
                                    {"bench 1", 1, 10, noon_us, "M. Muster", "trial: GO", "TB\x1b[2J"}};
  CHECK(render(log, false) ==
        "2026-01-09T12:00:00Z  -          boards entered  boards.csv  bench 1, epoch 1, record 9\n"
        "2026-01-09T12:00:00Z  M. Muster  trial: GO       TB?[2J      bench 1, epoch 1, record 10\n");
  CHECK(render(std::vector<LogLine>{}, false) == "Nothing is on record.\n");
}
