#include "db/enter.hpp"

#include <algorithm>
#include <fstream>
#include <map>
#include <sstream>

#include "db/sqlite.hpp"
#include "tests/db/room.hpp"

using namespace jigwright;
using room::must;

namespace {

constexpr const char* boards =
    "order,build_no,serial,panel,product\n"
    "WO-1,1,TB-01,P1,amplifier\n"
    "WO-1,2,TB-02,P1,amplifier\n"
    "WO-1,3,TB-03,P2,amplifier\n";
constexpr const char* reels =
    "reel,maker,part,lot,date_code,distributor,rereeled,quantity,marking\n"
    "R-1,Alder Works,AW1,A-77,2431,Pier Parts,no,100,AW\n"
    "R-2,Birch Works,BW1,B-12,2024-W40,Quay Parts,,,\n";
constexpr const char* feeds =
    "order,designator,reel,from,to\n"
    "WO-1,U7,R-1,1,2\n"
    "WO-1,U7,R-2,3,3\n";

std::shared_ptr<const SourceText> file(const std::string& name, const std::string& text) {
  return std::make_shared<SourceText>(SourceText{name, text});
}

struct Entered {
  std::vector<EnteredFile> files;
  std::string faults;
  bool any;
};

Entered enter(Store& store, const std::vector<std::shared_ptr<const SourceText>>& files) {
  Faults faults;
  auto done = must(store.enter(files, room::noon_us, faults));
  return {std::move(done), render(faults), faults.any()};
}

std::int64_t rows(Store& store) {
  return *store.database().first(
      "SELECT (SELECT count(*) FROM build) + (SELECT count(*) FROM board) + (SELECT count(*) FROM reel) + "
      "(SELECT count(*) FROM lot) + (SELECT count(*) FROM feed) + (SELECT count(*) FROM product_order)");
}

std::string slurp(const std::filesystem::path& path) {
  std::ifstream in(path, std::ios::binary);
  std::stringstream out;
  out << in.rdbuf();
  return out.str();
}

/// The store that the broken files meet: the three lists above.
std::unique_ptr<Store> stocked() {
  auto store = room::memory();
  const Entered done = enter(*store, {file("boards.csv", boards), file("reels.csv", reels), file("feeds.csv", feeds)});
  REQUIRE(done.faults == "");
  return store;
}

}  // namespace

TEST_CASE("lists of boards, reels and feeds are taken in together, in any order of the files") {
  const auto store = room::memory();
  const Entered done = enter(*store, {file("f.csv", feeds), file("r.csv", reels), file("b.csv", boards)});
  CHECK(done.faults == "");
  REQUIRE(done.files.size() == 3);
  CHECK(done.files[0].kind == "feeds");
  CHECK(done.files[0].added == 2);
  CHECK(done.files[1].kind == "reels");
  CHECK(done.files[1].added == 2);
  CHECK(done.files[2].kind == "boards");
  CHECK(done.files[2].added == 3);
  Query q = store->database().query(
      "SELECT r.date_code, r.rereeled, r.quantity, l.maker FROM reel r JOIN lot l ON l.id = r.lot ORDER BY r.name");
  REQUIRE(q.next());
  CHECK(q.text(0) == "2024-W31");
  CHECK(q.integer(1) == 0);
  CHECK(q.integer(2) == 100);
  REQUIRE(q.next());
  CHECK(q.text(3) == "Birch Works");
  CHECK(q.null(1));
  CHECK(q.null(2));
}

TEST_CASE("a second time changes nothing and says so") {
  const auto store = stocked();
  const std::int64_t before = rows(*store);
  const Entered again = enter(*store, {file("b.csv", boards), file("r.csv", reels), file("f.csv", feeds)});
  CHECK(again.faults == "");
  for (const EnteredFile& f : again.files) {
    CHECK(f.added == 0);
    CHECK(f.unchanged > 0);
  }
  CHECK(rows(*store) == before);
}

TEST_CASE("a file that repeats itself counts the repeats as unchanged") {
  const auto store = room::memory();
  const Entered done = enter(*store, {file("b.csv", boards), file("b2.csv", boards)});
  CHECK(done.faults == "");
  CHECK(done.files[0].added == 3);
  CHECK(done.files[1].added == 0);
  CHECK(done.files[1].unchanged == 3);
}

TEST_CASE("nothing of any file is taken in when the last row of the last one is bad") {
  const auto store = room::memory();
  const std::string bad = std::string(feeds) + "WO-1,R12,R-9,1,3\n";
  const Entered done = enter(*store, {file("b.csv", boards), file("r.csv", reels), file("f.csv", bad)});
  CHECK(done.any);
  CHECK(done.files.empty());
  CHECK(rows(*store) == 0);
}

TEST_CASE("columns may stand in any order and any case") {
  const auto store = room::memory();
  const Entered done =
      enter(*store, {file("b.csv", "Serial,Panel,Build_No,Product,Order\nTB-01,P1,7,amplifier,WO-1\n")});
  CHECK(done.faults == "");
  CHECK(store->database().first("SELECT build_no FROM build") == 7);
}

TEST_CASE("a board tried before its list arrives gets its build place") {
  const auto store = room::memory();
  room::try_board(*store, "TB-02", Judgement::go);
  CHECK(enter(*store, {file("b.csv", boards)}).faults == "");
  CHECK(store->database().first("SELECT count(*) FROM board") == 3);
  CHECK(store->database().first("SELECT build_no FROM boards WHERE serial = 'TB-02' AND judgement = 'GO'") == 2);
}

TEST_CASE("a feed known within a window keeps its four ends") {
  const auto store = stocked();
  const std::string windowed =
      "order,designator,reel,possible_from,from,to,possible_to\n"
      "WO-1,R12,R-1,1,1,1,2\n"
      "WO-1,R12,R-2,2,,,3\n";
  CHECK(enter(*store, {file("f.csv", windowed)}).faults == "");
  Query q = store->database().query(
      "SELECT poss_from, cert_from, cert_to, poss_to FROM feed WHERE designator = 'R12' ORDER BY id");
  REQUIRE(q.next());
  CHECK(q.integer(3) == 2);
  CHECK(q.integer(2) == 1);
  REQUIRE(q.next());
  CHECK(q.integer(0) == 2);
  CHECK(q.integer(1) > q.integer(2));
  CHECK(q.integer(3) == 3);
}

TEST_CASE("a reel fed past its quantity is a warning, and is taken in") {
  const auto store = stocked();
  const Entered done = enter(*store, {file("b.csv", "order,build_no,serial,panel,product\nWO-2,99,TB-99,,\n"),
                                      file("f.csv", "order,designator,reel,from,to\nWO-2,U7,R-1,1,99\n")});
  CHECK(done.faults ==
        "f.csv:2:9: warning: reel R-1 held 100 parts, and its feeds take 101\n"
        "  WO-2,U7,R-1,1,99\n"
        "          ^^^\n"
        "  check the ranges and the reel's quantity\n");
  CHECK(!done.any);
  CHECK(done.files[1].added == 1);
}

TEST_CASE("a feed beyond the order's last board is a warning") {
  const auto store = stocked();
  const Entered done = enter(*store, {file("f.csv", "order,designator,reel,from,to\nWO-1,R12,R-2,1,30\n")});
  CHECK(done.faults ==
        "f.csv:2:16: warning: order WO-1 has boards up to build number 3 only\n"
        "  WO-1,R12,R-2,1,30\n"
        "                 ^^\n"
        "  check the range\n");
}

TEST_CASE("one broken list causes no faults about the names in it") {
  const auto store = room::memory();
  const std::string bad_reels = std::string(reels) + "R-3,Birch Works,BW1,B-13,2499,,,,\n";
  const std::string more = std::string(feeds) + "WO-1,R12,R-3,1,3\n";
  const Entered done = enter(*store, {file("b.csv", boards), file("r.csv", bad_reels), file("f.csv", more)});
  CHECK(done.faults.find("unknown reel") == std::string::npos);
  CHECK(done.faults.starts_with("r.csv:4:26: date_code: \"2499\" names no week: 2024 has weeks 1 to 52\n"));
}

TEST_CASE("reading stops after a thousand faults, and says so") {
  const auto store = room::memory();
  std::string text = "order,build_no,serial,panel,product\n";
  for (int i = 0; i < 3000; ++i) text += "WO-1,x,TB,,\n";
  Faults faults;
  must(store->enter({file("b.csv", text)}, room::noon_us, faults));
  CHECK(faults.all().size() == 1001);
  CHECK(faults.all().back().what == "too many faults: the file was not read beyond this row");
}

TEST_CASE("more warnings than that hinder nothing") {
  const auto store = stocked();
  std::string text = "order,designator,reel,from,to\n";
  for (int i = 0; i < 1500; ++i) text += "WO-1,R" + std::to_string(i) + ",R-2,1,9\n";
  const Entered done = enter(*store, {file("f.csv", text)});
  REQUIRE(!done.any);
  CHECK(done.files[0].added == 1500);
}

TEST_CASE("the sample's lists are sound") {
  const std::filesystem::path folder = SOURCE_FOLDER "/sample-runs";
  const auto store = room::memory();
  std::vector<std::shared_ptr<const SourceText>> files;
  for (const char* name : {"boards.csv", "reels.csv", "feeds.csv"})
    files.push_back(must(read_source((folder / name).string())));
  const Entered done = enter(*store, files);
  CHECK(done.faults == "");
  CHECK(done.files[0].added == 240);
  CHECK(store->database().first("SELECT count(*) FROM carries WHERE reel = 'R-7003'") == 62);
}

// Each NAME.csv under tests/data/csv/broken meets a store that holds the lists at the head of this file; NAME.expected
// is the exact report.
TEST_CASE("each broken list gets its exact message, and nothing of it is taken in") {
  const std::filesystem::path folder = std::filesystem::path(TEST_DATA) / "csv" / "broken";
  int seen = 0;
  for (const auto& entry : std::filesystem::directory_iterator(folder)) {
    if (entry.path().extension() != ".csv") continue;
    ++seen;
    const std::string name = entry.path().filename().string();
    CAPTURE(name);
    const auto store = stocked();
    const std::int64_t before = rows(*store);
    const Entered done = enter(*store, {file(name, slurp(entry.path()))});
    CHECK(done.any);
    CHECK(rows(*store) == before);
    auto expected = entry.path();
    CHECK(done.faults == slurp(expected.replace_extension(".expected")));
  }
  CHECK(seen >= 15);
}
