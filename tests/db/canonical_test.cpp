#include "db/canonical.hpp"

#include <doctest/doctest.h>

#include <cmath>
#include <limits>
#include <random>

using namespace jigwright;

namespace {

/// Everything that a reader can be asked for, in the order of laid_out().
struct Read {
  std::string bare_text, text, blob, empty_text;
  std::int64_t number{}, small_1{}, small_254{}, small_255{}, small_negative{}, integer{};
  std::optional<double> present, absent, real, nan, missing_real;
  std::optional<std::int64_t> missing_integer, held_integer;
  std::optional<std::string> missing_text, held_text;
  char mark{};
};

std::string laid_out() {
  Canonical c;
  c.add(std::string_view("a bare text")).add(std::int64_t{-5}).add(std::optional(-2.5)).add(std::optional<double>());
  c.small(1).small(254).small(255).small(-7).mark('e');
  c.integer(std::numeric_limits<std::int64_t>::min()).real(1e-300).real(std::nan("")).null();
  c.null().integer(42).text("text \xc3\xa4").blob(std::string_view("\0\xff", 2)).text("");
  c.null().text("held");
  return c.bytes();
}

Read read(CanonicalReader& r) {
  Read out;
  out.bare_text = r.text();
  out.number = r.integer();
  out.present = r.maybe_real();
  out.absent = r.maybe_real();
  out.small_1 = r.small();
  out.small_254 = r.small();
  out.small_255 = r.small();
  out.small_negative = r.small();
  out.mark = r.mark();
  out.integer = r.integer_column();
  out.real = r.maybe_real_column();
  out.nan = r.maybe_real_column();
  out.missing_real = r.maybe_real_column();
  out.missing_integer = r.maybe_integer_column();
  out.held_integer = r.maybe_integer_column();
  out.text = r.text_column();
  out.blob = r.blob_column();
  out.empty_text = r.text_column();
  out.missing_text = r.maybe_text_column();
  out.held_text = r.maybe_text_column();
  return out;
}

}  // namespace

TEST_CASE("a reader gives back what was laid out, of every kind of column") {
  const std::string bytes = laid_out();
  CanonicalReader r(bytes);
  const Read out = read(r);
  REQUIRE(!r.failed());
  CHECK(r.at_end());
  CHECK(out.bare_text == "a bare text");
  CHECK(out.number == -5);
  CHECK(out.present == -2.5);
  CHECK(!out.absent);
  CHECK(out.small_1 == 1);
  CHECK(out.small_254 == 254);
  CHECK(out.small_255 == 255);
  CHECK(out.small_negative == -7);
  CHECK(out.mark == 'e');
  CHECK(out.integer == std::numeric_limits<std::int64_t>::min());
  CHECK(out.real == 1e-300);
  CHECK(!out.nan);  // as a database gives it back
  CHECK(!out.missing_real);
  CHECK(!out.missing_integer);
  CHECK(out.held_integer == 42);
  CHECK(out.text == "text \xc3\xa4");
  CHECK(out.blob == std::string("\0\xff", 2));
  CHECK(out.empty_text.empty());
  CHECK(!out.missing_text);
  CHECK(out.held_text == "held");
}

TEST_CASE("every shorter body fails, and reads as nothing from there on") {
  const std::string bytes = laid_out();
  for (std::size_t length = 0; length < bytes.size(); ++length) {
    const std::string cut = bytes.substr(0, length);  // so that a read beyond it is one beyond the memory
    CanonicalReader r(cut);
    read(r);
    CAPTURE(length);
    CHECK(r.failed());
    CHECK(r.at_end());
    CHECK(r.text().empty());
    CHECK(r.mark() == 0);
  }
}

TEST_CASE("a text's length beyond the bytes fails, also one that would wrap around") {
  for (const std::int64_t length : {std::int64_t{2}, std::int64_t{1} << 62, std::int64_t{-1}, std::int64_t{-8}}) {
    const std::string bytes = Canonical().add(length).mark('x').bytes();
    CanonicalReader r(bytes);
    CHECK(r.text().empty());
    CHECK(r.failed());
  }
}

TEST_CASE("a column of another type fails") {
  const std::string bytes = Canonical().text("12").bytes();
  for (int kind = 0; kind < 3; ++kind) {
    CanonicalReader r(bytes);
    if (kind == 0) CHECK(r.integer_column() == 0);
    if (kind == 1) CHECK(!r.maybe_real_column());
    if (kind == 2) CHECK(r.blob_column().empty());
    CHECK(r.failed());
  }
  const std::string null = Canonical().null().bytes();
  CanonicalReader r(null);
  r.integer_column();
  CHECK(r.failed());  // NULL, where there must be a number
}

TEST_CASE("ten thousand damaged bodies give an error or texts from within the bytes") {
  const std::string good = laid_out();
  std::mt19937_64 random(11);
  int failed = 0;
  for (int i = 0; i < 10'000; ++i) {
    std::string bytes = good;
    for (std::uint64_t n = 1 + random() % 4; n > 0; --n) bytes[random() % bytes.size()] = static_cast<char>(random());
    if (random() % 4 == 0) bytes.resize(random() % bytes.size());
    CanonicalReader r(bytes);
    const Read out = read(r);
    failed += r.failed() ? 1 : 0;
    CHECK(out.bare_text.size() + out.text.size() + out.blob.size() + out.held_text.value_or("").size() <= bytes.size());
  }
  CHECK(failed > 1000);
  CHECK(failed < 10'000);
}
