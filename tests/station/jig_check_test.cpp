// `jig-check` as a command: exit code, page, the act in the store, and the boards that a failed check holds.
#include "station/jig_check.hpp"

#include <doctest/doctest.h>
#include <unistd.h>

#include <CLI/CLI.hpp>
#include <cstdio>
#include <filesystem>
#include <fstream>
#include <sstream>

#include "db/boards.hpp"
#include "db/jig_checks.hpp"
#include "db/store.hpp"
#include "sequencer/station_file.hpp"
#include "station/jig_check_text.hpp"

using namespace jigwright;
namespace fs = std::filesystem;

namespace {

/// A folder that goes with the test.
struct Folder {
  fs::path path;
  Folder() {
    std::string name = (fs::temp_directory_path() / "jig-check-XXXXXX").string();
    REQUIRE(::mkdtemp(name.data()) != nullptr);
    path = name;
  }
  ~Folder() { fs::remove_all(path); }
  std::string store() const { return (path / "results.db").string(); }
};

struct Ran {
  int code{-1};
  std::string page;
  bool says(const std::string& text) const { return page.find(text) != std::string::npos; }
};

/// The command with these words; what it prints goes into a file meanwhile.
Ran run(const Folder& folder, std::vector<std::string> words) {
  CLI::App app;
  JigCheckCommand command(app);
  words.insert(words.begin(), {"jig-check", SOURCE_FOLDER "/sample-runs/jig-check.toml"});
  std::reverse(words.begin(), words.end());
  app.parse(words);
  const std::string file = (folder.path / "page").string();
  std::fflush(stdout);
  const int kept = ::dup(STDOUT_FILENO);
  REQUIRE(std::freopen(file.c_str(), "w", stdout) != nullptr);
  StationFile station;
  station.name = "bench 1";
  const auto code = command.run(station, folder.store(), "jigwright test");
  std::fflush(stdout);
  ::dup2(kept, STDOUT_FILENO);
  ::close(kept);
  std::ifstream in(file);
  std::ostringstream page;
  page << in.rdbuf();
  return {code.value_or(-1), page.str()};
}

std::unique_ptr<Store> opened(const Folder& folder) {
  auto store = Store::open(folder.store());
  REQUIRE(store.ok());
  return std::move(store.value());
}

ActRecord last_check(const Folder& folder) {
  const auto store = opened(folder);
  const auto act = last_act(store->database(), "jig-check");
  REQUIRE(act.has_value());
  return *act;
}

void try_board(Store& store, const std::string& serial, const std::string& station = "bench 1",
               Purpose purpose = Purpose::board) {
  TrialStart start;
  start.serial = serial;
  start.station = station;
  start.at_us = 1'767'960'000'000'000;
  start.origin = Origin::simulated;
  start.purpose = purpose;
  start.plan = "p";
  start.limit_set = "l";
  start.limit_revision = 1;
  start.documents = {{"plan", "p.toml", "p"}, {"jig", "j.toml", "j"}, {"limits", "l.toml", "l"}};
  const auto open = store.begin_trial(start);
  REQUIRE_MESSAGE(open.ok(), (open.ok() ? "" : describe(open.error())));
  TrialEnd end;
  end.outcome.judgement = Judgement::go;
  REQUIRE(store.finish_trial(open.value(), end).ok());
}

std::vector<std::string> checked(Store& store, const std::string& result, const std::string& station = "bench 1") {
  ActRecord act;
  act.kind = "jig-check";
  act.at_us = 1'767'960'000'000'000;
  act.station = station;
  act.values["result"] = result;
  const auto held = write_jig_check(store.database(), store.uuids(), act, "the check failed: K12");
  REQUIRE(held.ok());
  return held.value();
}

using Boards = std::vector<std::string>;

}  // namespace

TEST_CASE("a sound jig is JIG OK, exit code 0, and the act names every part's trial") {
  const Folder folder;
  const Ran ran = run(folder, {"--yes", "--operator", "O. Perator"});
  CHECK(ran.code == 0);
  CHECK(ran.page.ends_with("JIG OK\n"));
  CHECK(ran.says("No reading tells: K22, supply to board"));
  const ActRecord act = last_check(folder);
  CHECK(act.reason == "ok");
  CHECK(act.who == "O. Perator");
  CHECK(act.about == "bench jig 1");
  CHECK(act.values.at("result") == "ok");
  for (const char* part : {"check-copper", "check-empty", "check-reference", "check-reject"})
    CHECK(act.values.at(part).size() == 36);
}

TEST_CASE("a fault is JIG NOT OK, exit code 1, names the load, and leaves the later parts untried") {
  const Folder folder;
  const Ran ran = run(folder, {"--yes", "--fault", "load-off:1 nF"});
  CHECK(ran.code == 1);
  CHECK(ran.page.ends_with("JIG NOT OK\n"));
  CHECK(ran.says("! ref-loads: capacitance (K27, load 1 nF)"));
  CHECK(ran.says("NO-GO at 3.3 nF: not tried"));
  const ActRecord act = last_check(folder);
  CHECK(act.reason == "check-reference: ref-loads: capacitance (K27, load 1 nF)");
  CHECK(act.values.at("result") == "failed");
  CHECK(act.values.count("check-copper") == 1);
  CHECK(act.values.count("check-reject") == 0);
}

TEST_CASE("a silent meter, or nobody to answer, is exit code 2") {
  const Folder folder;
  CHECK(run(folder, {"--yes", "--fault", "meter-silent"}).code == 2);
  CHECK(last_check(folder).values.at("result") == "in doubt");
  const Ran unplaced = run(folder, {"--answer", "check-copper=yes", "--answer", "check-empty=no"});
  CHECK(unplaced.code == 2);
  CHECK(unplaced.says("not tried, answered no: Is the nest empty"));
  CHECK(last_check(folder).values.at("result") == "in doubt");
}

TEST_CASE("a nest that the jig does not have, and an answer without a plan, are refused") {
  const Folder folder;
  CHECK(run(folder, {"--yes", "--nest", "2"}).code == 4);
  CHECK(run(folder, {"--answer", "yes"}).code == 4);
}

TEST_CASE("a failed check holds the boards tried since the last good one, and no others") {
  const Folder folder;
  const auto store = opened(folder);
  try_board(*store, "A-1");
  CHECK(checked(*store, "ok").empty());
  try_board(*store, "A-2");
  try_board(*store, "A-3");
  try_board(*store, "CHECK-1", "bench 1", Purpose::jig_check);
  try_board(*store, "B-1", "bench 2");
  CHECK(checked(*store, "in doubt").empty());
  CHECK((checked(*store, "failed") == Boards{"A-2", "A-3"}));
  const auto hold = last_act(store->database(), "hold");
  REQUIRE(hold.has_value());
  CHECK((hold->boards == Boards{"A-2", "A-3"}));
  CHECK(hold->reason == "the check failed: K12");
  const auto now = board_now(store->database(), "A-2");
  REQUIRE(now.ok());
  CHECK(now.value().standing.state() == BoardState::held);
  // A second failure holds only what came in between, and a good check nothing.
  try_board(*store, "A-4");
  CHECK((checked(*store, "failed") == Boards{"A-4"}));
  CHECK(checked(*store, "ok").empty());
  CHECK((checked(*store, "failed", "bench 2") == Boards{"B-1"}));
}

TEST_CASE("no part, or one that was not tried, is no good jig") {
  CHECK(verdict_of({}) == PartVerdict::in_doubt);
  CheckedPart untried;
  CHECK(verdict_of({untried}) == PartVerdict::in_doubt);
  CheckedPart met;
  met.end.emplace();
  met.says.verdict = PartVerdict::met;
  CHECK(verdict_of({met}) == PartVerdict::met);
  CHECK(verdict_of({met, untried}) == PartVerdict::in_doubt);
  CheckedPart failed = met;
  failed.says.verdict = PartVerdict::failed;
  CHECK(verdict_of({failed, untried}) == PartVerdict::failed);
}
