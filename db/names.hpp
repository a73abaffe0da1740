// The nearest name that the store knows, for messages about one that it does not. db/'s own.
#pragma once
#include <optional>
#include <string>
#include <vector>

#include "db/sqlite.hpp"

namespace jigwright {

/// @param also  names known from elsewhere, a file under way say
std::optional<std::string> nearest_order(Database& database, const std::string& name,
                                         std::vector<std::string> also = {});
std::optional<std::string> nearest_reel(Database& database, const std::string& name,
                                        std::vector<std::string> also = {});
/// In a large store only the serials beside it in sorted order, and the first many, are looked at.
std::optional<std::string> nearest_serial(Database& database, const std::string& name);

}  // namespace jigwright
