// Errors as values. One type for the whole program: what happened, where (a file's line, or an instrument and its
// command), what to do. No exceptions cross a room's border. Plain data; any thread.
#pragma once
#include <cstdint>
#include <optional>
#include <string>
#include <utility>
#include <variant>

namespace jigwright {

struct Error {
  /// Stored and printed as a word; never renumbered.
  enum class Kind : std::uint8_t {
    file = 1,        ///< a file of the user's is at fault or can't be read
    instrument = 2,  ///< an instrument answered wrongly, refused, or is lost
    late = 3,        ///< a deadline passed
    store = 4,       ///< the store can't record or answer
    person = 5,      ///< a person stopped or did not answer
    usage = 6,       ///< the command's words are off
    internal = 7,    ///< a fault of this program
  };
  Kind kind{Kind::internal};
  std::string what;
  std::string where;  ///< empty where nothing can be named
  std::string to_do;  ///< empty where nothing can be advised
};

/// "what (where): to do", one line, control characters replaced.
std::string describe(const Error& error);

/// The text with control characters (C0, DEL, C1, those that turn the direction of writing) and bytes that are no UTF-8
/// replaced by '?', so that input can't drive a terminal.
std::string printable(std::string_view text);

struct Done {};

/// A value or an Error. Ask ok() first: value() on an error is undefined, as error() on a value is.
template <class T>
class [[nodiscard]] Result {
 public:
  Result(T value) : held_(std::in_place_index<0>, std::move(value)) {}
  Result(Error error) : held_(std::in_place_index<1>, std::move(error)) {}
  bool ok() const { return held_.index() == 0; }
  explicit operator bool() const { return ok(); }
  T& value() { return *std::get_if<0>(&held_); }
  const T& value() const { return *std::get_if<0>(&held_); }
  Error& error() { return *std::get_if<1>(&held_); }
  const Error& error() const { return *std::get_if<1>(&held_); }

 private:
  std::variant<T, Error> held_;
};

}  // namespace jigwright
