#include "station/questions.hpp"

#include <doctest/doctest.h>

#include <limits>
#include <nlohmann/json.hpp>

using namespace jigwright;

namespace {

constexpr double none = std::numeric_limits<double>::quiet_NaN();
constexpr std::int64_t noon_us = 1'767'960'000'000'000;  // 2026-01-09T12:00:00Z

BoardPlace place(const std::string& serial, std::int64_t build_no, std::optional<Judgement> judgement) {
  BoardPlace b;
  b.serial = serial;
  b.order = "WO-1";
  b.product = "amplifier";
  b.panel = "P1";
  b.build_no = build_no;
  b.judgement = judgement;
  if (judgement) b.at_us = noon_us;
  b.trials = judgement ? 1 : 0;
  return b;
}

ReelFacts reel() {
  return {"R-2", "Birch Works", "BW1", "B-12", "2024-W40", "Quay Parts", "=B", true, 500};
}

ReelTrace reel_trace() {
  return {reel(), {{place("TB-01", 1, Judgement::go), {"U7"}, true}, {place("TB-02", 2, {}), {"U7", "U8"}, false}}};
}

ShownFinding finding(const char* variant, double value, double margin_left, Verdict verdict) {
  ShownFinding f;
  f.metric.name = {"offset", "offset", variant};
  f.metric.unit = Unit::volt;
  Limit limit;
  limit.specification = {-0.5e-3, 0.5e-3};
  limit.nominal = 0;
  limit.applied = {-0.48e-3, 0.48e-3};
  f.limit = limit;
  f.judged.finding = {0, value, 4e-6, 10, FindingState::measured};
  f.judged.verdict = verdict;
  f.judged.margin = margin_left;
  return f;
}

BoardShown board_shown() {
  ShownTrial first;
  first.attempt = 1;
  first.at_us = noon_us;
  first.took_ms = 2240;
  first.operator_name = "A. Tester";
  first.station = "bench 1";
  first.nest = 1;
  first.program = "jigwright 0.1.0";
  first.plan = "plan-1";
  first.limit_set = "limits-1";
  first.limit_revision = 3;
  first.depth = "full";
  first.judgement = Judgement::no_go;
  first.deciding = "offset: offset (x1)";
  first.origin = Origin::simulated;
  first.findings = {finding("x1", 0.6e-3, -0.25, Verdict::missed), finding("x10", 0.1e-3, 0.7916, Verdict::met)};
  ShownFinding missing;
  missing.metric.name = {"offset", "offset", "x100"};
  missing.metric.unit = Unit::volt;
  missing.judged.finding = {2, none, none, 0, FindingState::over_range};
  missing.judged.verdict = Verdict::recorded;
  first.findings.push_back(missing);
  ShownTrial second = first;
  second.attempt = 2;
  second.at_us += 60'000'000;
  second.open = true;
  second.counts = true;
  second.judgement = Judgement::void_;
  second.void_reason = "the program ended in mid-trial";
  second.deciding.reset();
  second.took_ms.reset();
  second.findings.clear();
  BoardShown out{place("TB-01", 1, Judgement::void_), {first, second}};
  out.board.trials = 2;
  return out;
}

}  // namespace

TEST_CASE("a reel's boards as a table under a plain sentence") {
  CHECK(render(reel_trace(), Form::table) ==
        "Reel R-2 (Birch Works BW1, lot B-12, date code 2024-W40) feeds U7 and U8 on 2 boards of WO-1, 1 of them only "
        "possibly:\n"
        "  serial  order  build no  place  how       judgement  tried\n"
        "  TB-01   WO-1          1  U7     certain   GO         2026-01-09T12:00:00Z\n"
        "  TB-02   WO-1          2  U7 U8  possible  not tried  -\n"
        "1 GO, 0 NO-GO, 0 VOID, 1 not tried.\n");
}

TEST_CASE("a reel that no board carries says so") {
  CHECK(render(ReelTrace{reel(), {}}, Form::table) ==
        "Reel R-2 (Birch Works BW1, lot B-12, date code 2024-W40) is on no board on record.\n");
}

TEST_CASE("a reel's boards as CSV and JSON") {
  CHECK(render(reel_trace(), Form::csv) ==
        "reel,serial,order,build_no,panel,designators,how,judgement,at,trials\r\n"
        "R-2,TB-01,WO-1,1,P1,U7,certain,GO,2026-01-09T12:00:00Z,1\r\n"
        "R-2,TB-02,WO-1,2,P1,U7 U8,possible,,,0\r\n");
  const auto json = nlohmann::json::parse(render(reel_trace(), Form::json));
  CHECK(json["reel"] == "R-2");
  CHECK(json["rereeled"] == true);
  CHECK(json["boards"][0]["how"] == "certain");
  CHECK(json["boards"][1]["designators"] == std::vector<std::string>{"U7", "U8"});
  CHECK(json["boards"][1]["judgement"].is_null());
}

TEST_CASE("a board's reels in the three forms; a cell like a formula is made safe") {
  const SerialTrace trace{place("TB-01", 1, Judgement::go), {{"U7", reel(), true}}};
  CHECK(render(trace, Form::table) ==
        "TB-01 (build number 1 of WO-1, amplifier): GO, tried 2026-01-09T12:00:00Z, 1 trial.\n"
        "It carries:\n"
        "  place  reel  maker        part  lot   date code  distributor  re-reeled  marking  how\n"
        "  U7     R-2   Birch Works  BW1   B-12  2024-W40   Quay Parts   yes        =B       certain\n");
  CHECK(render(trace, Form::csv) ==
        "serial,designator,reel,maker,part,lot,date_code,distributor,rereeled,quantity,marking,how\r\n"
        "TB-01,U7,R-2,Birch Works,BW1,B-12,2024-W40,Quay Parts,yes,500,'=B,certain\r\n");
  const auto json = nlohmann::json::parse(render(trace, Form::json));
  CHECK(json["serial"] == "TB-01");
  CHECK(json["reels"][0]["designator"] == "U7");
  CHECK(json["reels"][0]["marking"] == "=B");
}

TEST_CASE("a board's record as a table: trials, then the findings by margin") {
  CHECK(render(board_shown(), Form::table) ==
        "TB-01 (build number 1 of WO-1, amplifier): VOID, tried 2026-01-09T12:00:00Z, 2 trials.\n"
        "  trial  tried                 judgement    took  for\n"
        "     1   2026-01-09T12:00:00Z  NO-GO      2.24 s  offset: offset (x1)\n"
        "     2*  2026-01-09T12:01:00Z  VOID            -  the program ended in mid-trial\n"
        "  (* speaks for the board)\n"
        "Trial 1: plan plan-1, limits limits-1 rev 3, full; by A. Tester at bench 1, nest 1.\n"
        "Trial 2: plan plan-1, limits limits-1 rev 3, full; by A. Tester at bench 1, nest 1.\n"
        "Findings of trial 1, least margin first (margin: share left of the room from nominal to limit):\n"
        "  margin  finding                     value  U (k=2)  limits             readings  verdict\n"
        "   -25 %  offset: offset (x1)        600 uV     8 uV  -480 uV to 480 uV        10  missed\n"
        "    79 %  offset: offset (x10)       100 uV     8 uV  -480 uV to 480 uV        10  met\n"
        "       -  offset: offset (x100)  over range        -  -                         0  recorded\n");
}

TEST_CASE("a board's record as CSV has a line a finding, and one for a trial without any") {
  const std::string csv = render(board_shown(), Form::csv);
  CHECK(csv.find(
            "TB-01,1,2026-01-09T12:00:00Z,NO-GO,,no,simulated,plan-1,limits-1,3,full,2240,A. Tester,bench 1,1,offset,"
            "offset,x1,V,0.0006,4e-06,10,measured,missed,-0.25,-0.00048,0.00048,-0.0005,0.0005\r\n") !=
        std::string::npos);
  CHECK(csv.find("x100,V,,,0,over range,recorded,,,,,\r\n") != std::string::npos);
  CHECK(
      csv.find("TB-01,2,2026-01-09T12:01:00Z,VOID,the program ended in mid-trial,yes,simulated,plan-1,limits-1,3,full,,"
               "A. Tester,bench 1,1,,,,,,,,,,,,,,\r\n") != std::string::npos);
  CHECK(csv.find("nan") == std::string::npos);
}

TEST_CASE("a board's record as JSON has null where there is no value") {
  const auto json = nlohmann::json::parse(render(board_shown(), Form::json));
  CHECK(json["judgement"] == "VOID");
  CHECK(json["trials"][0]["findings"][0]["value"] == 0.6e-3);
  CHECK(json["trials"][0]["findings"][0]["verdict"] == "missed");
  CHECK(json["trials"][0]["findings"][2]["value"].is_null());
  CHECK(json["trials"][0]["deciding"] == "offset: offset (x1)");
  CHECK(json["trials"][1]["ended"] == false);
  CHECK(json["trials"][1]["took_ms"].is_null());
}

TEST_CASE("control characters and broken text in a serial reach no terminal and break no JSON") {
  SerialTrace trace{place("TB\x1b[2J\xff", 1, {}), {}};
  CHECK(render(trace, Form::table).find('\x1b') == std::string::npos);
  CHECK(nlohmann::json::accept(render(trace, Form::json)));
}

TEST_CASE("what was entered is told by file") {
  CHECK(render(std::vector<EnteredFile>{
            {"b.csv", "boards", 240, 0}, {"f.csv", "feeds", 2, 12}, {"r.csv", "reels", 0, 1}}) ==
        "b.csv: 240 boards, all new\n"
        "f.csv: 14 feeds, 2 new, 12 in the store already\n"
        "r.csv: 1 reel, all in the store already\n");
  CHECK(render(std::vector<EnteredFile>{{"b.csv", "boards", 0, 3}}) ==
        "b.csv: 3 boards, all in the store already\nNothing was changed.\n");
}
