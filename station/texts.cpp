#include "station/texts.hpp"

#include <fmt/format.h>

#include "base/nearest.hpp"
#include "base/source.hpp"
#include "base/toml.hpp"

namespace jigwright {

/// Made by the build from station/texts/*.toml: language and text.
std::vector<std::pair<std::string, std::string>> embedded_texts();

std::vector<std::string> Texts::languages() {
  std::vector<std::string> out;
  for (const auto& [language, text] : embedded_texts()) out.push_back(language);
  return out;
}

Result<Texts> Texts::of(const std::string& language) {
  const std::string plain = language.substr(0, language.find('-'));
  for (const auto& [name, text] : embedded_texts()) {
    if (name != plain) continue;
    auto source = std::make_shared<SourceText>();
    source->name = name + ".toml";
    source->text = text;
    Faults faults;
    const auto root = parse_toml(source, faults);
    if (!root) return Error{Error::Kind::file, "the texts can't be read", name, render(faults)};
    Texts out;
    for (const Member& m : *root->table())
      if (m.node.text() != nullptr) out.texts_.emplace(m.key, *m.node.text());
    return out;
  }
  return Error{Error::Kind::file,
               fmt::format("there are no texts in the language \"{}\"", printable(language)),
               {},
               "set \"language\" in the station file to one of " + listed(languages())};
}

std::string Texts::say(std::string_view key, Names names) const {
  const auto found = texts_.find(key);
  if (found == texts_.end()) return std::string(key);
  std::string out = found->second;
  for (const auto& [name, value] : names) {
    const std::string place = fmt::format("{{{}}}", name);
    if (const auto at = out.find(place); at != std::string::npos) out.replace(at, place.size(), printable(value));
  }
  return out;
}

}  // namespace jigwright
