#include "db/orders.hpp"

#include "db/sqlite.hpp"

namespace jigwright {

Result<std::vector<std::string>> serials_of_order(Database& database, const std::string& order) {
  Transaction reading(database, Transaction::Kind::read);
  std::vector<std::string> out;
  {
    Query q = database.query(
        "SELECT b.serial FROM product_order o JOIN build d ON d.ord = o.id JOIN board b ON b.id = d.board "
        "WHERE o.name = ? ORDER BY d.build_no",
        order);
    while (q.next()) out.push_back(q.text(0));
  }
  if (const auto done = reading.commit(); !done) return done.error();
  return out;
}

}  // namespace jigwright
