#include "station/authority.hpp"

#include <fmt/format.h>
#include <termios.h>
#include <unistd.h>

#include <chrono>
#include <fstream>
#include <iostream>
#include <thread>

#include "base/source.hpp"
#include "db/people.hpp"

namespace jigwright {
namespace {

Error usage(std::string what, std::string to_do) {
  return {Error::Kind::usage, std::move(what), "--by", std::move(to_do)};
}

/// The terminal shows nothing of what is typed while this lives.
class Unseen {
 public:
  Unseen() : changed_(::tcgetattr(STDIN_FILENO, &before_) == 0) {
    termios now = before_;
    now.c_lflag &= ~static_cast<tcflag_t>(ECHO);
    if (changed_) ::tcsetattr(STDIN_FILENO, TCSAFLUSH, &now);
  }
  ~Unseen() {
    if (changed_) ::tcsetattr(STDIN_FILENO, TCSAFLUSH, &before_);
  }
  Unseen(const Unseen&) = delete;
  Unseen& operator=(const Unseen&) = delete;

 private:
  termios before_{};
  bool changed_;
};

std::string line_of(std::istream& in) {
  std::string out;
  std::getline(in, out);
  if (!out.empty() && out.back() == '\r') out.pop_back();
  return out;
}

}  // namespace

Result<std::string> read_password(const std::string& file, const std::string& prompt) {
  if (file == "-") return line_of(std::cin);
  if (!file.empty()) {
    std::ifstream in(file);
    if (!in) return Error{Error::Kind::usage, "the password file can't be read", file, "check the path"};
    return line_of(in);
  }
  if (::isatty(STDIN_FILENO) == 0)
    return Error{Error::Kind::usage, "nobody is here to type a password", {}, "give --password-file FILE"};
  fmt::print(stderr, "{}: ", prompt);
  std::string out;
  {
    const Unseen unseen;
    out = line_of(std::cin);
  }
  fmt::print(stderr, "\n");
  return out;
}

Result<std::string> engineer(Database& database, const Signature& signature) {
  if (signature.by.empty()) return usage("who does this is not said", "give --by NAME");
  if (printable(signature.by) != signature.by) return usage("the name holds control characters", "type it again");
  if (!has_engineers(database)) return signature.by;
  const auto person = person_of(database, signature.by);
  if (!person || person->gone || person->role != engineer_role)
    return usage(fmt::format("{} is not registered as an engineer", signature.by), "\"jigwright people\" lists who is");
  const auto password = read_password(signature.password_file, fmt::format("Password of {}", signature.by));
  if (!password) return password.error();
  if (password_fits(*person, password.value())) return signature.by;
  std::this_thread::sleep_for(std::chrono::seconds(1));  // guessing is slow work
  return usage("the password is wrong", "type it again");
}

}  // namespace jigwright
