#include "db/counts.hpp"

#include <vector>

#include "db/speaks.hpp"
#include "db/sqlite.hpp"

namespace jigwright {

void settle_counts(Database& database, std::int64_t board) {
  std::vector<std::int64_t> ids;
  std::vector<PastTrial> trials;
  std::int64_t held = 0;
  {
    Query q = database.query(
        "SELECT t.id, t.judgement, t.counts, EXISTS(SELECT 1 FROM act a WHERE a.trial = t.uuid AND a.kind = 'review') "
        "FROM trial t WHERE t.board = ? ORDER BY t.id",
        board);
    while (q.next()) {
      ids.push_back(q.integer(0));
      trials.push_back({static_cast<Judgement>(q.integer(1)), q.integer(3) != 0});
      if (q.integer(2) != 0) held = ids.back();
    }
  }
  const auto speaks = speaking_trial(trials);
  if (!speaks || ids[*speaks] == held) return;
  database.run("UPDATE trial SET counts = 0 WHERE id = ?", held);
  database.run("UPDATE trial SET counts = 1 WHERE id = ?", ids[*speaks]);
}

}  // namespace jigwright
