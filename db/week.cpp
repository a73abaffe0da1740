#include "db/week.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cctype>
#include <optional>

namespace jigwright {
namespace {

using namespace std::chrono;

Error bad(std::string what, std::string to_do) {
  return {Error::Kind::file, std::move(what), {}, std::move(to_do)};
}

bool all_digits(std::string_view text) {
  return std::all_of(text.begin(), text.end(), [](char c) { return c >= '0' && c <= '9'; });
}

int number(std::string_view digits) {
  int out = 0;
  for (char c : digits) out = 10 * out + (c - '0');
  return out;
}

/// "2431", "2024-W31" or "2024W31"; the week's number is not checked yet.
std::optional<Week> split(std::string_view code) {
  if (code.size() == 4 && all_digits(code)) return Week{2000 + number(code.substr(0, 2)), number(code.substr(2))};
  std::string compact(code);
  std::erase(compact, '-');
  const bool shaped = compact.size() == 7 && (compact[4] == 'W' || compact[4] == 'w') && code.size() <= 8;
  if (!shaped || !all_digits(compact.substr(0, 4)) || !all_digits(compact.substr(5))) return std::nullopt;
  return Week{number(compact.substr(0, 4)), number(compact.substr(5))};
}

std::string advice(std::string_view code, const Week& now) {
  if (code.size() == 3 && all_digits(code)) return fmt::format("spreadsheets drop a leading zero: write \"0{}\"", code);
  const bool four = code.size() == 4 && all_digits(code);
  const Week turned = four ? Week{2000 + number(code.substr(2)), number(code.substr(0, 2))} : Week{};
  if (four && turned <= now && turned.number >= 1 && turned.number <= weeks_in(turned.year))
    return fmt::format("if this means week {} of {}, write \"{}{}\"", turned.number, turned.year, code.substr(2),
                       code.substr(0, 2));
  return "write the label's year and week, \"2431\", or the ISO week, \"2024-W31\"";
}

}  // namespace

std::string utc_text(std::int64_t at_us) {
  const sys_time<microseconds> at{microseconds(at_us)};
  const sys_days day = floor<days>(at);
  const year_month_day date(day);
  const hh_mm_ss time(floor<seconds>(at - day));
  return fmt::format("{:04}-{:02}-{:02}T{:02}:{:02}:{:02}Z", static_cast<int>(date.year()),
                     static_cast<unsigned>(date.month()), static_cast<unsigned>(date.day()), time.hours().count(),
                     time.minutes().count(), time.seconds().count());
}

Week week_of(sys_days day) {
  const sys_days thursday = day - (weekday(day) - Monday) + days(3);
  const year_month_day date(thursday);
  const sys_days first = sys_days(date.year() / January / 1);
  return {static_cast<int>(date.year()), static_cast<int>((thursday - first).count() / 7) + 1};
}

int weeks_in(int year_number) {
  return week_of(sys_days(year(year_number) / December / 28)).number;
}

std::string text(const Week& week) {
  return fmt::format("{:04}-W{:02}", week.year, week.number);
}

Result<Week> parse_date_code(std::string_view code, const Week& now) {
  const auto week = split(code);
  if (!week) return bad(fmt::format("\"{}\" is not a date code", code), advice(code, now));
  if (week->year < 1970 || week->number < 1 || week->number > weeks_in(week->year))
    return bad(fmt::format("\"{}\" names no week: {} has weeks 1 to {}", code, week->year, weeks_in(week->year)),
               advice(code, now));
  if (*week > now)
    return bad(fmt::format("\"{}\" lies in the future: this is week {}", code, text(now)), advice(code, now));
  return *week;
}

}  // namespace jigwright
