#include "base/source.hpp"

#include <doctest/doctest.h>

#include <cstdio>
#include <string>

using namespace jigwright;

namespace {

std::shared_ptr<const SourceText> source(std::string text, std::string name = "plan.toml") {
  return std::make_shared<const SourceText>(SourceText{std::move(name), std::move(text)});
}

std::string shown(const std::string& text, int line, int column, int length, std::string to_do = "") {
  return render(Fault{Severity::fault, {source(text), line, column, length}, "wrong", std::move(to_do)});
}

}  // namespace

TEST_CASE("a fault shows its place, the line, a caret under the stretch, and what to do") {
  CHECK(shown("a = 1\nrelays = [\"K1\", \"K99\"]\n", 2, 17, 5, "write \"K9\"") ==
        "plan.toml:2:17: wrong\n"
        "  relays = [\"K1\", \"K99\"]\n"
        "                  ^^^^^\n"
        "  write \"K9\"\n");
}

TEST_CASE("a fault of the whole file shows no line") {
  CHECK(shown("a = 1\n", 0, 0, 1) == "plan.toml: wrong\n");
  CHECK(render(Fault{Severity::fault, {}, "wrong", ""}) == "wrong\n");
}

TEST_CASE("warnings and notes say so behind the place") {
  CHECK(render(Fault{Severity::warning, {source("a"), 1, 1, 1}, "odd", ""}) ==
        "plan.toml:1:1: warning: odd\n  a\n  ^\n");
  CHECK(render(Fault{Severity::note, {source("a"), 1, 1, 1}, "so", ""}) == "plan.toml:1:1: note: so\n  a\n  ^\n");
}

TEST_CASE("columns count characters, not bytes") {
  CHECK(shown("x = \"5 \u00b5V\" # \u2126\n", 1, 14, 1) ==
        "plan.toml:1:14: wrong\n"
        "  x = \"5 \u00b5V\" # \u2126\n"
        "               ^\n");
  CHECK(shown("\u00b5\u00b5 = 1\n", 1, 6, 1) == "plan.toml:1:6: wrong\n  \u00b5\u00b5 = 1\n       ^\n");
}

TEST_CASE("indentation is taken off, by spaces and tabs alike") {
  CHECK(shown("\t\t  a = 1\n", 1, 5, 1) == "plan.toml:1:5: wrong\n  a = 1\n  ^\n");
}

TEST_CASE("a tab inside the line leaves the caret under its stretch") {
  CHECK(shown("a\t= 1\n", 1, 5, 1) == "plan.toml:1:5: wrong\n  a = 1\n      ^\n");
}

TEST_CASE("control characters of the input never reach the terminal") {
  CHECK(shown("a = \"\x1b[2J\x7f\"\n", 1, 5, 7) == "plan.toml:1:5: wrong\n  a = \"?[2J?\"\n      ^^^^^^^\n");
  CHECK(render(Fault{Severity::fault, {source("a", "ev\x1bil.toml"), 1, 1, 1}, "b\x07", "c\nd"}) ==
        "ev?il.toml:1:1: b?\n  a\n  ^\n  c?d\n");
  // C1 controls as UTF-8: some terminals obey them.
  CHECK(printable("a\u009b2Jb") == "a?2Jb");
}

TEST_CASE("bytes that are no UTF-8 never reach the terminal") {
  CHECK(printable("a\xff\xc3") == "a??");
  CHECK(printable("\xe2\x84\xa6 \xc2\xb5 \xf0\x9f\x94\xa7") == "\xe2\x84\xa6 \xc2\xb5 \xf0\x9f\x94\xa7");
  CHECK(printable("\xc0\xaf \xed\xa0\x80 \xf5\x80\x80\x80") == "?? ??? ????");
}

TEST_CASE("a long line is cut round the stretch") {
  const std::string line = std::string(300, 'a') + "BAD" + std::string(300, 'b');
  const std::string out = shown(line, 1, 301, 3);
  const auto first = out.find("\n  ") + 3;
  const auto second = out.find("\n  ", first);
  const std::string excerpt = out.substr(first, second - first);
  const std::string carets = out.substr(second + 3);
  CHECK(excerpt.size() == 100);
  CHECK(excerpt.substr(carets.find('^'), 3) == "BAD");
  CHECK(carets.find("^^^\n") != std::string::npos);
}

TEST_CASE("a stretch longer than the line ends with it") {
  CHECK(shown("abc\n", 1, 2, 50) == "plan.toml:1:2: wrong\n  abc\n   ^^\n");
}

TEST_CASE("a place beyond the line or the file is shown at its end") {
  CHECK(shown("abc\n", 1, 40, 1) == "plan.toml:1:40: wrong\n  abc\n     ^\n");
  CHECK(shown("abc\n", 9, 1, 1) == "plan.toml:9:1: wrong\n  \n  ^\n");
}

TEST_CASE("a line that ends in carriage return and line feed is shown without them") {
  CHECK(shown("a = 1\r\nb = 2\r\n", 2, 5, 1) == "plan.toml:2:5: wrong\n  b = 2\n      ^\n");
}

TEST_CASE("long advice is wrapped at spaces") {
  std::string advice;
  for (int i = 0; i < 30; ++i) advice += "word" + std::to_string(i) + " ";
  const std::string out = shown("a", 1, 1, 1, advice + "end");
  for (std::size_t at = 0; at < out.size();) {
    const auto end = out.find('\n', at);
    CHECK(end - at <= 102);
    at = end + 1;
  }
  CHECK(out.find("word29 end\n") != std::string::npos);
}

TEST_CASE("faults are shown by file in order of mention, then by line and column, each once") {
  const auto a = source("1\n2\n", "a.toml");
  const auto b = source("1\n2\n", "b.toml");
  Faults faults;
  faults.fault({b, 2, 1, 1}, "third of b");
  faults.fault({a, 1, 1, 1}, "first of a");
  faults.warning({b, 1, 1, 1}, "first of b");
  faults.fault({a, 1, 1, 1}, "first of a");
  CHECK(render(faults) ==
        "b.toml:1:1: warning: first of b\n  1\n  ^\n"
        "b.toml:2:1: third of b\n  2\n  ^\n"
        "a.toml:1:1: first of a\n  1\n  ^\n");
}

TEST_CASE("only a true fault counts as one") {
  Faults faults;
  faults.warning({}, "odd");
  faults.note({}, "so");
  CHECK_FALSE(faults.any());
  faults.fault({}, "wrong");
  CHECK(faults.any());
  CHECK(faults.count(Severity::warning) == 1);
  CHECK(faults.count(Severity::fault) == 1);
}

TEST_CASE("a file that is not there, or none, is an error that says why") {
  const auto absent = read_source("/nowhere/plan.toml");
  REQUIRE_FALSE(absent.ok());
  CHECK(describe(absent.error()) ==
        "can't read the file: No such file or directory (/nowhere/plan.toml): check the path");
  const auto folder = read_source(TEST_DATA);
  REQUIRE_FALSE(folder.ok());
  CHECK(folder.error().what == "this is not a plain file");
}

TEST_CASE("a file larger than allowed is refused") {
  const auto got = read_source(TEST_DATA "/nist_strd_univariate/PiDigits.dat", 1000);
  REQUIRE_FALSE(got.ok());
  CHECK(got.error().kind == Error::Kind::file);
}
