#include "db/names.hpp"

#include "base/nearest.hpp"

namespace jigwright {
namespace {

void take(Query query, std::vector<std::string>& names) {
  while (query.next()) names.push_back(query.text(0));
}

}  // namespace

std::optional<std::string> nearest_order(Database& database, const std::string& name, std::vector<std::string> also) {
  take(database.query("SELECT name FROM product_order LIMIT 20000"), also);
  return nearest(name, also);
}

std::optional<std::string> nearest_reel(Database& database, const std::string& name, std::vector<std::string> also) {
  take(database.query("SELECT name FROM reel LIMIT 20000"), also);
  return nearest(name, also);
}

std::optional<std::string> nearest_serial(Database& database, const std::string& name) {
  std::vector<std::string> known;
  take(database.query("SELECT serial FROM board WHERE serial > ? ORDER BY serial LIMIT 500", name), known);
  take(database.query("SELECT serial FROM board WHERE serial < ? ORDER BY serial DESC LIMIT 500", name), known);
  take(database.query("SELECT serial FROM board LIMIT 20000"), known);
  return nearest(name, known);
}

}  // namespace jigwright
