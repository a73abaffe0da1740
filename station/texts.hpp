// The line's words in the station's language, from station/texts/LANGUAGE.toml, which the build puts into the program.
// Names in braces are filled in. Any thread.
#pragma once
#include <initializer_list>
#include <map>
#include <string>
#include <string_view>
#include <utility>
#include <vector>

#include "base/error.hpp"

namespace jigwright {

class Texts {
 public:
  /// @param language  "de-AT" falls back to "de". Error kind file: no such language, with those there are
  static Result<Texts> of(const std::string& language);
  static std::vector<std::string> languages();

  using Names = std::initializer_list<std::pair<std::string_view, std::string>>;
  /// The text, each {name} filled in; control characters of what is filled in don't reach a terminal. A key that is
  /// missing shows itself: a test keeps that from happening.
  std::string say(std::string_view key, Names names = {}) const;
  const std::map<std::string, std::string, std::less<>>& all() const { return texts_; }

 private:
  std::map<std::string, std::string, std::less<>> texts_;
};

}  // namespace jigwright
