// What the store knows of an order. One thread.
#pragma once
#include <string>
#include <vector>

#include "base/error.hpp"

namespace jigwright {

class Database;

/// Serials of an order by build place; empty for an order that the store doesn't know. Error kind store.
Result<std::vector<std::string>> serials_of_order(Database& database, const std::string& order);

}  // namespace jigwright
