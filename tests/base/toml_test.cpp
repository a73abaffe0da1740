#include "base/toml.hpp"

#include <doctest/doctest.h>

#include <string>

using namespace jigwright;

namespace {

std::optional<Node> tree(std::string text, Faults& faults) {
  return parse_toml(std::make_shared<const SourceText>(SourceText{"a.toml", std::move(text)}), faults);
}

Node sound_tree(std::string text) {
  Faults faults;
  auto root = tree(std::move(text), faults);
  INFO(render(faults));
  REQUIRE(root.has_value());
  return *root;
}

/// What a reader says of a text, with `use` asking for its keys.
template <class Use>
std::string words(const std::string& text, Use use) {
  const Node root = sound_tree(text);
  Faults faults;
  TableReader reader(root, "a", faults);
  use(reader);
  return render(faults);
}

}  // namespace

TEST_CASE("every value keeps its place") {
  const Node root = sound_tree("# first\nname = \"abc\"\n[inner]\nlist = [1, 22, \"x\"]\n");
  const Node* name = find(*root.table(), "name");
  REQUIRE(name != nullptr);
  CHECK(where(name->region) == "a.toml:2:8");
  CHECK(name->region.length == 5);
  const Node* list = find(*find(*root.table(), "inner")->table(), "list");
  REQUIRE(list != nullptr);
  CHECK(list->region.length == 12);
  CHECK(where((*list->array())[1].region) == "a.toml:4:12");
  CHECK((*list->array())[1].region.length == 2);
}

TEST_CASE("keys stand in the file's order, whatever their names") {
  const Node root = sound_tree("z = 1\na = 2\nm = 3\n");
  const Table& table = *root.table();
  REQUIRE(table.size() == 3);
  CHECK(table[0].key == "z");
  CHECK(table[1].key == "a");
  CHECK(table[2].key == "m");
}

TEST_CASE("the first fault of syntax is told and nothing comes back") {
  Faults faults;
  CHECK_FALSE(tree("a = \"x\nb = = 2\n", faults).has_value());
  CHECK(faults.count(Severity::fault) == 1);
}

TEST_CASE("hostile bytes are a fault, never a crash") {
  for (const std::string& text :
       {std::string("\xff\xfe"), std::string("a = \"\x00\"", 8), std::string("a = '\x01'"), std::string("[[[[[["),
        std::string("a = [") + std::string(5000, '['), std::string("a = 1979-13-45"),
        std::string("\xef\xbb\xbf"
                    "a = "),
        std::string("a.b = 1\na = 2"), std::string("a = 99999999999999999999")}) {
    Faults faults;
    CHECK_FALSE(tree(text, faults).has_value());
    CHECK(faults.count(Severity::fault) == 1);
  }
}

TEST_CASE("values of the wrong kind name what was found") {
  const std::string text = "a = 1\nb = 1.5\nc = true\nd = [1]\ne = {}\nf = 2026-01-31\ng = nan\n";
  for (const auto& [key, kind] :
       {std::pair{"a", "a whole number"}, std::pair{"b", "a decimal number"}, std::pair{"c", "true or false"},
        std::pair{"d", "an array"}, std::pair{"e", "a table"}, std::pair{"f", "a date or time"},
        std::pair{"g", "no finite number"}}) {
    const std::string said = words(text, [&](TableReader& r) { r.text(key); });
    CHECK(said.find(std::string("expected a text in quotes, found ") + kind) != std::string::npos);
  }
}

TEST_CASE("an absent key that may be absent is no fault") {
  CHECK(words("", [](TableReader& r) {
          CHECK_FALSE(r.text("a").has_value());
          CHECK_FALSE(r.quantity("b", Unit::volt).has_value());
          CHECK_FALSE(r.integer("c", 0, 1).has_value());
          CHECK_FALSE(r.boolean("d").has_value());
          CHECK(r.texts("e").empty());
          CHECK(r.tables("f").empty());
          CHECK(r.table("g") == nullptr);
          r.finish();
        }) == "");
}

TEST_CASE("an absent key that is needed says what to add") {
  CHECK(words("", [](TableReader& r) { r.need_quantity("rail", Unit::volt); }) ==
        "a.toml: a: \"rail\" is missing\n  add rail = \"... V\"\n");
  CHECK(words("", [](TableReader& r) { r.need_quantity("tolerance", Unit::ratio); }) ==
        "a.toml: a: \"tolerance\" is missing\n  add tolerance = \"... ppm\"\n");
}

TEST_CASE("a misspelt key is told once, not also as missing") {
  CHECK(words("rial = \"12 V\"\n", [](TableReader& r) {
          r.need_quantity("rail", Unit::volt);
          r.finish();
        }) == "a.toml:1:1: a: unknown key \"rial\"\n  rial = \"12 V\"\n  ^^^^\n  write rail\n");
}

TEST_CASE("two misspellings of one key leave both told") {
  const std::string said = words("rial = \"12 V\"\nrall = \"12 V\"\n", [](TableReader& r) {
    r.need_quantity("rail", Unit::volt);
    r.finish();
  });
  CHECK(said.find("unknown key \"rial\"") != std::string::npos);
  CHECK(said.find("unknown key \"rall\"") != std::string::npos);
}

TEST_CASE("a missing key and an unlike unknown one are both told") {
  const std::string said = words("colour = \"red\"\n", [](TableReader& r) {
    r.need_text("name");
    r.finish();
  });
  CHECK(said.find("\"name\" is missing") != std::string::npos);
  CHECK(said.find("unknown key \"colour\"") != std::string::npos);
}

TEST_CASE("whole numbers keep within their bounds, ends included") {
  CHECK(words("a = 1\nb = 16\n", [](TableReader& r) {
          CHECK(r.need_integer("a", 1, 16).value == 1);
          CHECK(r.need_integer("b", 1, 16).value == 16);
        }) == "");
  CHECK(words("a = 17\n", [](TableReader& r) { r.integer("a", 1, 16); }) ==
        "a.toml:1:5: a: \"a\": expected 1 to 16, found 17\n  a = 17\n      ^^\n");
}

TEST_CASE("a quantity without its unit is refused, in quotes or bare") {
  CHECK(words("a = 5\n", [](TableReader& r) { r.quantity("a", Unit::volt); }) ==
        "a.toml:1:5: a: \"a\": 5 has no unit, expected a voltage (V)\n  a = 5\n      ^\n  write it with its unit in "
        "quotes, as in \"5 V\"\n");
  CHECK(words("a = \"5\"\n", [](TableReader& r) { r.quantity("a", Unit::volt); }).find("\"5\" has no unit") !=
        std::string::npos);
}

TEST_CASE("a count may be a bare number") {
  CHECK(words("a = 2.5\n", [](TableReader& r) { CHECK(r.quantity("a", Unit::count)->value == 2.5); }) == "");
  CHECK(words("a = nan\n", [](TableReader& r) { CHECK_FALSE(r.quantity("a", Unit::count).has_value()); }) != "");
}

TEST_CASE("above zero means above, and zero or above includes zero") {
  CHECK(words("a = \"0 V\"\n", [](TableReader& r) { r.need_positive("a", Unit::volt); }) != "");
  CHECK(words("a = \"0 V\"\n", [](TableReader& r) { r.need_not_negative("a", Unit::volt); }) == "");
  CHECK(words("a = \"-1 V\"\n", [](TableReader& r) { r.need_not_negative("a", Unit::volt); }) != "");
}

TEST_CASE("a plausible value passes without a word, its ends included") {
  const Plausible usual{1e3, 1e6};
  for (const char* text : {"a = \"1 kohm\"", "a = \"1 Mohm\"", "a = \"22 kohm\""})
    CHECK(words(text, [&](TableReader& r) { r.quantity("a", Unit::ohm, usual); }) == "");
}

TEST_CASE("an implausible value is a warning, and the value is taken") {
  const std::string said = words("a = \"5 mohm\"\n", [](TableReader& r) {
    const auto q = r.quantity("a", Unit::ohm, Plausible{1e6, 1e7});
    REQUIRE(q.has_value());
    CHECK(q->value == doctest::Approx(0.005));
    CHECK_FALSE(r.faults().any());
  });
  CHECK(said ==
        "a.toml:1:5: warning: a: \"a\": \"5 mohm\" is unusual\n  a = \"5 mohm\"\n      ^^^^^^^^\n"
        "  usual is 1 Mohm to 10 Mohm; m is milli, for mega write M: \"5 Mohm\"\n");
}

TEST_CASE("one text stands for a list of one, and a wrong item is told at its place") {
  CHECK(words("a = \"x\"\n", [](TableReader& r) { CHECK(r.texts("a").size() == 1); }) == "");
  CHECK(words("a = [\"x\", 7]\n", [](TableReader& r) { CHECK(r.texts("a").size() == 1); }) ==
        "a.toml:1:11: a: \"a\": expected a text in quotes, found a whole number\n  a = [\"x\", 7]\n            ^\n");
}

TEST_CASE("a needed list may not be empty") {
  CHECK(words("a = []\n", [](TableReader& r) { r.need_texts("a"); }).find("\"a\" is empty") != std::string::npos);
}

TEST_CASE("a word out of a set offers the nearest") {
  CHECK(words("a = \"nome\"\n",
              [](TableReader& r) {
                r.choice("a", {"none", "typed"});
              }) ==
        "a.toml:1:5: a: \"a\": unknown word \"nome\"\n  a = \"nome\"\n      ^^^^^^\n  write \"none\"; known are: none, "
        "typed\n");
}

TEST_CASE("a quoted key, a dotted key and a key with an escape all find their place") {
  const Node root = sound_tree("\"a b\" = 1\nc.d = 2\n");
  CHECK((*root.table())[0].key == "a b");
  CHECK((*root.table())[0].key_region.length == 5);
  CHECK(find(*find(*root.table(), "c")->table(), "d") != nullptr);
}
