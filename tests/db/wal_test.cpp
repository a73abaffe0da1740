// The log beside the store while something reads the store for long.
#include "db/schema.hpp"
#include "tests/db/line.hpp"

using namespace jigwright;
using room::Line;
using room::must;
namespace fs = std::filesystem;

TEST_CASE("the log beside the store shrinks again once a long reading has ended") {
  constexpr std::uintmax_t limit = 16u << 20;
  Line line;
  line.factory = room::Factory({7, 100'000, 200, 12, 400'000});  // 0.6 MB a trial
  const auto store = line.store();
  line.try_one(*store, 0);
  const auto reader = must(Database::open(line.path, Database::Access::read, false, 0));
  int board = 1;
  {
    Transaction reading(*reader, Transaction::Kind::read);
    CHECK(reader->first("SELECT count(*) FROM trial") == 1);
    while (fs::file_size(line.path + "-wal") <= limit + (2u << 20)) line.try_one(*store, board++);
    CHECK(reader->first("SELECT count(*) FROM trial") == 1);  // the reading's own moment
  }
  for (int i = 0; i < 4; ++i) line.try_one(*store, board++);
  CHECK(fs::file_size(line.path + "-wal") <= limit);
  CHECK(must(audit(store->database())).whole());
}
