#include "db/readings_archive.hpp"

#include "db/digest.hpp"
#include "db/stored_trials.hpp"
#include "tests/db/disks.hpp"
#include "tests/db/line.hpp"

using namespace jigwright;
using room::Line;
using room::must;
namespace fs = std::filesystem;

namespace {

Result<Archived> archive(Line& line, Store& store, const std::string& name, std::int64_t before_us,
                         std::int64_t at_once = archived_at_once) {
  return archive_readings(store.database(), store.uuids(), line.folder.file(name), before_us, "bench 1", "A. Tester",
                          line.now_us += 1'000'000, at_once);
}

std::int64_t kept(Store& store) {
  return store.database().first("SELECT count(*) FROM reading_blob WHERE body IS NOT NULL").value_or(-1);
}

}  // namespace

TEST_CASE("archived readings lie in the file, and the store stays whole with their hashes") {
  Line line;
  const auto store = line.store();
  for (int i = 0; i < 10; ++i) line.try_one(*store, i);
  const std::int64_t before_us = line.now_us - 5 * 2'000'000 + 1;  // the first five began before
  const Archived done = must(archive(line, *store, "old.records", before_us));
  CHECK(done.trials == 5);
  CHECK(done.bytes == 5 * 90);
  CHECK(kept(*store) == 5);
  const AuditReport report = must(audit(store->database()));
  for (const Difference& d : report.differences) FAIL_CHECK(sentence(d));
  CHECK(report.archived == 5);
  CHECK(report.records == 11);
  const std::string bytes = room::bytes_of(line.folder.file("old.records"));
  CopySet copies;
  const auto head = head_length(bytes, "");
  REQUIRE(head.has_value());
  CHECK(read_frames(std::string_view(bytes).substr(*head), copies) == bytes.size() - *head);
  const auto& chain = copies.chains.begin()->second;
  REQUIRE(chain.size() == 5);
  std::int64_t board = 0;
  for (const auto& [at, record] : chain) CHECK(record.readings == line.factory.end(board++).readings);
  Query q = store->database().query("SELECT sha256, name, who, trials, bytes FROM archived");
  REQUIRE(q.next());
  CHECK(q.text(0) == sha256(bytes));
  CHECK(q.text(1) == "old.records");
  CHECK(q.text(2) == "A. Tester");
  CHECK(q.integer(3) == 5);
  CHECK(q.integer(4) == 450);
}

TEST_CASE("a trial without its raw readings says so to whoever works it out again") {
  Line line;
  const auto store = line.store();
  line.try_one(*store, 0);
  must(archive(line, *store, "old.records", line.now_us + 1));
  line.try_one(*store, 1);
  const auto trials = must(stored_trials(store->database(), 0, 10));
  REQUIRE(trials.size() == 2);
  CHECK(trials[0].readings_format == 0);
  CHECK(trials[1].readings_format == 1);
}

TEST_CASE("many trials are archived in steps, the oldest first, each into a file of its own") {
  Line line;
  const auto store = line.store();
  for (int i = 0; i < 7; ++i) line.try_one(*store, i);
  const std::int64_t before_us = line.now_us + 1;
  CHECK(must(archive(line, *store, "1", before_us, 3)).trials == 3);
  CHECK(must(archive(line, *store, "2", before_us, 3)).trials == 3);
  CHECK(must(archive(line, *store, "3", before_us, 3)).trials == 1);
  CHECK(must(archive(line, *store, "4", before_us, 3)).trials == 0);
  CHECK(fs::exists(line.folder.file("3")));
  CHECK(!fs::exists(line.folder.file("4")));
  CHECK(kept(*store) == 0);
  CHECK(must(audit(store->database())).whole());
}

TEST_CASE("trials that began in the same microsecond are archived in one step") {
  Line line;
  const auto store = line.store();
  for (int i = 0; i < 6; ++i) {
    const OpenTrial open = must(store->begin_trial(room::start("TB-0" + std::to_string(i))));
    must(store->finish_trial(open, room::end(Judgement::go)));
  }
  CHECK(must(archive(line, *store, "1", room::noon_us + 1, 2)).trials == 6);
  CHECK(must(audit(store->database())).archived == 6);
}

TEST_CASE("a file that is there already, or a disk that fills up, leaves the store as it was") {
  Line line;
  const auto store = line.store();
  for (int i = 0; i < 20; ++i) line.try_one(*store, i);
  const auto before = room::content(store->database());
  room::write_bytes(line.folder.file("there"), "something");
  const auto there = archive(line, *store, "there", line.now_us + 1);
  REQUIRE(!there);
  CHECK(there.error().what == "the archive can't be made: File exists");
  CHECK(room::bytes_of(line.folder.file("there")) == "something");
  {
    const room::FileLimit limit(5'000);
    const auto full = archive(line, *store, "full", line.now_us + 1);
    REQUIRE(!full);
    CHECK(full.error().what == "the archive can't be written: File too large");
  }
  CHECK(!fs::exists(line.folder.file("full")));
  room::check_same(before, room::content(store->database()));
}

TEST_CASE("of a damaged store nothing is archived") {
  Line line;
  const auto store = line.store();
  for (int i = 0; i < 5; ++i) line.try_one(*store, i);
  store->database().run("UPDATE finding SET value = 0 WHERE trial = 3 AND metric = 1");
  const auto refused = archive(line, *store, "old.records", line.now_us + 1);
  REQUIRE(!refused);
  CHECK(refused.error().what ==
        "the store is damaged: trial (station bench 1, epoch 1, record 3): the rows are not what was recorded");
  CHECK(kept(*store) == 5);
  CHECK(!fs::exists(line.folder.file("old.records")));
}
