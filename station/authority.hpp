// Who stands behind a command: before an engineer is registered in the store, a name is taken as given; from then on an
// engineer's commands need an engineer's password.
#pragma once
#include <optional>
#include <string>

#include "base/error.hpp"

namespace jigwright {

class Database;

struct Signature {
  std::string by;             ///< name
  std::string password_file;  ///< first line of it; "-" = standard input; empty = asked on the terminal
};

/// The engineer's name. Error kind usage: no name, not an engineer, a wrong password (after a second's wait), nobody to
/// ask.
Result<std::string> engineer(Database& database, const Signature& signature);

/// A line from the terminal without showing it, or from the file.
Result<std::string> read_password(const std::string& file, const std::string& prompt);

}  // namespace jigwright
