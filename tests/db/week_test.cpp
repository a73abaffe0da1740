#include "db/week.hpp"

#include <doctest/doctest.h>

using namespace jigwright;
using namespace std::chrono;

TEST_CASE("ISO weeks about the turn of the year, as the standard's rule gives them") {
  // ISO 8601: week 1 has the year's first Thursday. 2004-12-31 was a Friday, 2008-12-29 and 2009-12-28 Mondays.
  CHECK(text(week_of(sys_days(2005y / 1 / 1))) == "2004-W53");
  CHECK(text(week_of(sys_days(2005y / 1 / 3))) == "2005-W01");
  CHECK(text(week_of(sys_days(2007y / 1 / 1))) == "2007-W01");
  CHECK(text(week_of(sys_days(2008y / 12 / 29))) == "2009-W01");
  CHECK(text(week_of(sys_days(2010y / 1 / 3))) == "2009-W53");
  CHECK(text(week_of(sys_days(2010y / 1 / 4))) == "2010-W01");
}

TEST_CASE("years of 53 weeks are those that hold 53 Thursdays") {
  for (int y = 1970; y <= 2099; ++y) {
    int thursdays = 0;
    for (sys_days d = sys_days(year(y) / 1 / 1); d < sys_days(year(y + 1) / 1 / 1); d += days(1))
      thursdays += weekday(d) == Thursday ? 1 : 0;
    CHECK(weeks_in(y) == thursdays);
  }
}

TEST_CASE("a date code is YYWW or an ISO week") {
  const Week now{2026, 2};
  for (const char* code : {"2431", "2024-W31", "2024W31", "2024-w31"}) {
    const auto week = parse_date_code(code, now);
    REQUIRE(week.ok());
    CHECK(text(week.value()) == "2024-W31");
  }
  CHECK(parse_date_code("2053", Week{2060, 1}).ok());  // 2020 had 53 weeks
  CHECK(parse_date_code("2602", now).ok());
}

TEST_CASE("a date code that names no week, or a week to come, is refused") {
  const Week now{2026, 2};
  for (const char* code : {"2400", "2453", "2603", "9931", "24311", "24W31", "2024-31", "31/24", "2024--W31", ""})
    CHECK(!parse_date_code(code, now).ok());
  CHECK(parse_date_code("931", now).error().to_do == "spreadsheets drop a leading zero: write \"0931\"");
  CHECK(parse_date_code("3124", now).error().to_do == "if this means week 31 of 2024, write \"2431\"");
}

TEST_CASE("times are written in UTC to the second") {
  CHECK(utc_text(0) == "1970-01-01T00:00:00Z");
  CHECK(utc_text(1'767'960'000'999'999) == "2026-01-09T12:00:00Z");
  CHECK(utc_text(-1) == "1969-12-31T23:59:59Z");
}
