#include "station/texts.hpp"

#include <doctest/doctest.h>

#include <filesystem>
#include <fstream>
#include <iterator>
#include <set>

#include "station/cards.hpp"

using namespace jigwright;

namespace {

Texts texts(const std::string& language) {
  auto out = Texts::of(language);
  REQUIRE(out.ok());
  return std::move(out.value());
}

/// What stands between `open` and the next `close`, wherever it is a plain word.
std::set<std::string> words_between(const std::string& text, char open, char close) {
  std::set<std::string> out;
  for (std::size_t at = text.find(open); at != std::string::npos; at = text.find(open, at + 1)) {
    const std::size_t end = text.find(close, at + 1);
    if (end == std::string::npos) break;
    const std::string word = text.substr(at + 1, end - at - 1);
    if (!word.empty() && word.find_first_not_of("abcdefghijklmnopqrstuvwxyz_") == std::string::npos) out.insert(word);
  }
  return out;
}

std::set<std::string> places_in(const std::string& text) {
  return words_between(text, '{', '}');
}

}  // namespace

TEST_CASE("every language has every key, and each text names the same things") {
  REQUIRE(Texts::languages().size() >= 2);
  const Texts english = texts("en");
  for (const std::string& language : Texts::languages()) {
    const Texts other = texts(language);
    CHECK(other.all().size() == english.all().size());
    for (const auto& [key, text] : english.all()) {
      CAPTURE(language);
      CAPTURE(key);
      const auto found = other.all().find(key);
      REQUIRE(found != other.all().end());
      CHECK(!found->second.empty());
      CHECK(places_in(found->second) == places_in(text));
    }
  }
}

TEST_CASE("every key that the program says is in the texts, and none is there for nothing") {
  std::set<std::string> said;
  const Texts english = texts("en");
  for (const char* file : {"line_session.cpp", "cards.cpp"}) {
    std::ifstream in(std::string(SOURCE_FOLDER) + "/station/" + file);
    REQUIRE(in);
    const std::string source{std::istreambuf_iterator<char>(in), {}};
    said.merge(words_between(source, '"', '"'));
    // say("key"...): the first word behind each call must be a key.
    for (std::size_t at = source.find("say(\""); at != std::string::npos; at = source.find("say(\"", at + 1)) {
      const std::string key = source.substr(at + 5, source.find('"', at + 5) - at - 5);
      CAPTURE(key);
      CHECK(english.all().count(key) == 1);
    }
  }
  for (const auto& [word, text] : english.all()) {
    CAPTURE(word);
    CHECK((said.count(word) == 1 || word == "language"));
  }
}

TEST_CASE("a regional language falls back to its own, an unknown one is told") {
  CHECK(texts("de-AT").say("ready") == texts("de").say("ready"));
  const auto none = Texts::of("xx");
  REQUIRE(!none.ok());
  CHECK(none.error().to_do == "set \"language\" in the station file to one of de, en");
}

TEST_CASE("what is filled in can't drive a terminal, nor be filled in again") {
  const Texts english = texts("en");
  CHECK(english.say("bar_scrapped", {{"serial", "\x1b[2J"}}).find('\x1b') == std::string::npos);
  CHECK(english.say("bar_held", {{"serial", "{reason}"}, {"reason", "dust"}}).find("dust") != std::string::npos);
}

TEST_CASE("code cards: no text is another's begin, and layouts move none but TEST's characters") {
  for (const CardCode& a : card_codes())
    for (const CardCode& b : card_codes())
      if (a.card != b.card) CHECK(!a.code.starts_with(b.code));
  for (const CardCode& c : card_codes()) {
    if (c.card == Card::test) continue;
    for (const char letter : c.code)
      CHECK(std::string("ABCDEFGHIJKLMNOPRSTUVX0123456789").find(letter) != std::string::npos);
    CHECK(card_of(c.code) == c.card);
  }
  // A German layout read as an English one: y and z change places, and so do - and the sharp s.
  CHECK(is_garbled_test("XJTEST/zyZY&?*<"));
  CHECK(!is_garbled_test(test_code()));
}

TEST_CASE("Code 128 of ISO/IEC 15417: start, data, check and stop symbols") {
  // "XJ01" in code set B: start B 104, X 56, J 42, 0 16, 1 17; check (104 + 1*56 + 2*42 + 3*16 + 4*17) mod 103 = 51.
  // Widths of symbols 104, 56, 42, 16, 17, 51 and stop, from the standard's table, from memory.
  std::string widths;
  for (const char* symbol : {"211214", "331121", "112133", "123122", "123221", "213113", "2331112"}) widths += symbol;
  const auto made = code128("XJ01");
  REQUIRE(made.ok());
  std::string found;
  for (const int w : made.value()) found += std::to_string(w);
  CHECK(found == widths);
}
