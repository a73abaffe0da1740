#include "db/csv.hpp"

#include <doctest/doctest.h>

using namespace jigwright;

namespace {

using Texts = std::vector<std::vector<std::string>>;

struct Read {
  Texts rows;
  std::string faults;
  std::vector<CsvRow> cells;
};

Read read(const std::string& text) {
  Faults faults;
  CsvReader csv(std::make_shared<SourceText>(SourceText{"t.csv", text}), faults);
  Read out;
  CsvRow row;
  while (csv.next(row)) {
    out.cells.push_back(row);
    out.rows.emplace_back();
    for (const CsvCell& c : row) out.rows.back().push_back(c.text);
  }
  out.faults = render(faults);
  return out;
}

}  // namespace

TEST_CASE("rows end with CRLF or LF, the last with or without (RFC 4180, 2.1 and 2.2)") {
  const Texts expected{{"aaa", "bbb", "ccc"}, {"zzz", "yyy", "xxx"}};
  CHECK(read("aaa,bbb,ccc\r\nzzz,yyy,xxx\r\n").rows == expected);
  CHECK(read("aaa,bbb,ccc\r\nzzz,yyy,xxx").rows == expected);
  CHECK(read("aaa,bbb,ccc\nzzz,yyy,xxx\n").rows == expected);
}

TEST_CASE("quotes hold commas and doubled quotes (RFC 4180, 2.5 to 2.7)") {
  CHECK(read("\"aaa\",\"b,bb\",ccc\n").rows == Texts{{"aaa", "b,bb", "ccc"}});
  CHECK(read("\"aaa\",\"b\"\"bb\",\"\"\n").rows == Texts{{"aaa", "b\"bb", ""}});
}

TEST_CASE("an empty cell at the end of a row is a cell") {
  CHECK(read("a,\n,\nb,c\n").rows == Texts{{"a", ""}, {"b", "c"}});
}

TEST_CASE("a byte order mark, blank lines and rows of empty cells are passed over") {
  CHECK(read("\xef\xbb\xbf"
             "a,b\n\n,,\nc,d\n\n")
            .rows == Texts{{"a", "b"}, {"c", "d"}});
}

TEST_CASE("spaces at a cell's ends are cut off") {
  CHECK(read(" a , \" b \" ,c d\n").rows == Texts{{"a", "b", "c d"}});
}

TEST_CASE("a cell knows its place in characters, quotes counted") {
  const Read r = read("\xc3\xa4\xc3\xb6,  \"x,y\",z\n");
  REQUIRE(r.cells.size() == 1);
  CHECK(r.cells[0][0].length == 2);
  CHECK(r.cells[0][1].column == 6);
  CHECK(r.cells[0][1].length == 5);
  CHECK(r.cells[0][2].column == 12);
}

TEST_CASE("an empty file has no rows and no faults") {
  CHECK(read("").rows.empty());
  CHECK(read("").faults.empty());
}

TEST_CASE("every byte sequence is read to its end without harm") {
  // A plain linear congruential generator (Knuth's MMIX constants) over the bytes that matter.
  const std::string alphabet("a,\"\r\n \xc3\xa4\x00;1", 12);
  std::uint64_t state = 1;
  for (int i = 0; i < 20000; ++i) {
    std::string text;
    for (int k = 0; k < 12; ++k) {
      state = state * 6364136223846793005u + 1442695040888963407u;
      text += alphabet[static_cast<std::size_t>(state >> 33) % alphabet.size()];
    }
    for (const auto& row : read(text).rows) CHECK(!row.empty());
  }
}

TEST_CASE("what is not UTF-8 is a fault at its place") {
  for (const char* bad : {"\xe4", "\xc0\xaf", "\xed\xa0\x80", "\xf5\x80\x80\x80", "\xe2\x82"})
    CHECK(read(std::string("a,b\nc,") + bad).faults.starts_with("t.csv:2:3: this is not UTF-8 text\n"));
}

TEST_CASE("cells are written so that they read back, and formulas are made safe") {
  CHECK(csv_cell("plain") == "plain");
  CHECK(csv_cell("a,b") == "\"a,b\"");
  CHECK(csv_cell("say \"so\"") == "\"say \"\"so\"\"\"");
  CHECK(csv_cell("two\nlines") == "\"two\nlines\"");
  CHECK(csv_cell(" x") == "\" x\"");
  CHECK(csv_cell("=1+1") == "'=1+1");
  CHECK(csv_cell("@sum") == "'@sum");
  CHECK(csv_cell("-12.5e-6") == "-12.5e-6");
  CHECK(csv_cell("+5") == "+5");
  CHECK(csv_cell("-x,y") == "\"'-x,y\"");
  CHECK(csv_cell("") == "");
}
