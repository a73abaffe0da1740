#include "base/quantity.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <charconv>
#include <cmath>
#include <vector>

#include "base/nearest.hpp"

namespace jigwright {
namespace {

struct UnitRow {
  Unit unit;
  std::string_view symbol;
  std::string_view name;
  bool prefixed;  // takes SI prefixes
};
constexpr std::array rows{
    UnitRow{Unit::count, "", "a plain number", false},
    UnitRow{Unit::volt, "V", "a voltage (V)", true},
    UnitRow{Unit::ampere, "A", "a current (A)", true},
    UnitRow{Unit::ohm, "ohm", "a resistance (ohm)", true},
    UnitRow{Unit::farad, "F", "a capacitance (F)", true},
    UnitRow{Unit::second, "s", "a time (s)", true},
    UnitRow{Unit::hertz, "Hz", "a frequency (Hz)", true},
    UnitRow{Unit::kelvin, "K", "a temperature difference (K)", true},
    UnitRow{Unit::celsius, "degC", "a temperature (degC)", false},
    UnitRow{Unit::ratio, "V/V", "a ratio (V/V, ppm or %)", false},
    UnitRow{Unit::volt_per_root_hertz, "V/rtHz", "a noise density (V/rtHz)", true},
    UnitRow{Unit::volt_per_second, "V/s", "a slew rate (V/s)", true},
    UnitRow{Unit::coulomb, "C", "a charge (C)", true},
    UnitRow{Unit::joule, "J", "an energy (J)", true},
    UnitRow{Unit::watt, "W", "a power (W)", true},
    UnitRow{Unit::metre, "m", "a length (m)", true},
    UnitRow{Unit::degree, "deg", "an angle (deg)", false},
};

struct Alias {
  std::string_view text;
  Unit unit;
  double factor;
};
constexpr std::array aliases{
    Alias{"ppm", Unit::ratio, 1e-6},    Alias{"ppb", Unit::ratio, 1e-9},   Alias{"%", Unit::ratio, 1e-2},
    Alias{"\u00b0C", Unit::celsius, 1}, Alias{"\u03a9", Unit::ohm, 1},     Alias{"\u2126", Unit::ohm, 1},
    Alias{"Ohm", Unit::ohm, 1},         Alias{"min", Unit::second, 60},    Alias{"h", Unit::second, 3600},
    Alias{"days", Unit::second, 86400}, Alias{"day", Unit::second, 86400},
};

struct Prefix {
  std::string_view text;
  double factor;
};
constexpr std::array prefixes{Prefix{"f", 1e-15},     Prefix{"p", 1e-12},     Prefix{"n", 1e-9}, Prefix{"u", 1e-6},
                              Prefix{"\u00b5", 1e-6}, Prefix{"\u03bc", 1e-6}, Prefix{"m", 1e-3}, Prefix{"k", 1e3},
                              Prefix{"M", 1e6},       Prefix{"G", 1e9},       Prefix{"T", 1e12}};

Error bad(std::string what, std::string to_do) {
  return Error{Error::Kind::file, std::move(what), {}, std::move(to_do)};
}

struct Scaled {
  Unit unit;
  double factor;
};

bool same_symbol(std::string_view text, Unit unit) {
  if (text == symbol(unit)) return true;
  return unit == Unit::ohm && (text == "\u03a9" || text == "\u2126" || text == "Ohm");
}

/// The unit word with its prefix, or nothing.
std::optional<Scaled> scaled_unit(std::string_view word) {
  for (const UnitRow& row : rows)
    if (row.unit != Unit::count && same_symbol(word, row.unit)) return Scaled{row.unit, 1.0};
  for (const Alias& a : aliases)
    if (word == a.text) return Scaled{a.unit, a.factor};
  for (const Prefix& p : prefixes) {
    if (!word.starts_with(p.text)) continue;
    const std::string_view rest = word.substr(p.text.size());
    for (const UnitRow& row : rows)
      if (row.prefixed && same_symbol(rest, row.unit)) return Scaled{row.unit, p.factor};
  }
  return std::nullopt;
}

std::string unit_advice(std::string_view word) {
  std::vector<std::string> known;
  for (const UnitRow& row : rows) {
    if (row.unit == Unit::count) continue;
    known.emplace_back(row.symbol);
    if (!row.prefixed) continue;
    for (const Prefix& p : prefixes)
      if (static_cast<unsigned char>(p.text[0]) < 0x80) known.push_back(std::string(p.text) + std::string(row.symbol));
  }
  // The same letters in another case come first: "mv" means mV sooner than V. "MOHM" may mean either.
  std::string same;
  for (const std::string& k : known)
    if (edit_distance(word, k) == 0 && !(word[0] == 'm' && k[0] == 'M'))
      same += fmt::format("{}\"{}\"", same.empty() ? "write " : " or ", k);
  if (!same.empty()) return same;
  return "units are V, A, ohm, F, s, Hz, K, degC, V/V, ppm, %, with the prefixes f p n u m k M G T";
}

std::string with_point(std::string_view text) {
  if (std::count(text.begin(), text.end(), ',') > 1) return "write the number without commas";
  std::string out(text);
  out[out.find(',')] = '.';
  return fmt::format("write a decimal point, as in \"{}\"", out);
}

}  // namespace

std::string_view symbol(Unit unit) {
  return rows[static_cast<std::size_t>(unit)].symbol;
}

std::string_view quantity_name(Unit unit) {
  return rows[static_cast<std::size_t>(unit)].name;
}

Result<Unit> unit_of(std::string_view text) {
  for (const UnitRow& row : rows)
    if (row.symbol == text) return row.unit;
  return bad(fmt::format("unknown unit \"{}\"", text), {});
}

Result<Quantity> parse_quantity(std::string_view text) {
  const std::string_view whole = text;
  auto trim = [](std::string_view s) {
    while (!s.empty() && s.front() == ' ') s.remove_prefix(1);
    while (!s.empty() && s.back() == ' ') s.remove_suffix(1);
    return s;
  };
  text = trim(text);
  std::string_view digits = text;
  if (digits.starts_with('+') && !digits.starts_with("+-")) digits.remove_prefix(1);
  double number = 0;
  const auto [end, fault] = std::from_chars(digits.data(), digits.data() + digits.size(), number);
  if (fault == std::errc::result_out_of_range) return bad(fmt::format("\"{}\" is out of range", whole), {});
  if (fault != std::errc{} || !std::isfinite(number))
    return bad(fmt::format("\"{}\" does not begin with a number", whole),
               "write a number and a unit, as in \"0.5 mV\"");
  std::string_view unit = digits.substr(static_cast<std::size_t>(end - digits.data()));
  if (unit.starts_with(',')) return bad(fmt::format("\"{}\" has a decimal comma", whole), with_point(whole));
  unit = trim(unit);
  if (unit.empty()) return Quantity{number, Unit::count};
  const auto scaled = scaled_unit(unit);
  if (!scaled) return bad(fmt::format("unknown unit \"{}\" in \"{}\"", unit, whole), unit_advice(unit));
  if (!std::isfinite(number * scaled->factor)) return bad(fmt::format("\"{}\" is out of range", whole), {});
  return Quantity{number * scaled->factor, scaled->unit};
}

Result<double> parse_quantity(std::string_view text, Unit unit) {
  auto q = parse_quantity(text);
  if (!q) return q.error();
  if (q.value().unit == unit) return q.value().value;
  const std::string example = unit == Unit::count   ? "1.5"
                              : unit == Unit::ratio ? "20 ppm"
                                                    : fmt::format("1.5 {}", symbol(unit));
  if (q.value().unit == Unit::count)
    return bad(fmt::format("\"{}\" has no unit, expected {}", text, quantity_name(unit)),
               fmt::format("write a unit, as in \"{}\"", example));
  return bad(fmt::format("expected {}, found {} in \"{}\"", quantity_name(unit), quantity_name(q.value().unit), text),
             fmt::format("write it as in \"{}\"", example));
}

namespace {

std::string number_text(double value, int significant) {
  if (value == 0) return "0";
  return fmt::format("{:.{}g}", value, significant);
}

/// Decimals kept plain: engineering scaling has brought the value into [1, 1000) or close to it.
std::string scaled_text(double value, double factor, int significant) {
  const double scaled = value / factor;
  const double size = std::abs(scaled);
  if (size >= 1e6 || (size > 0 && size < 1e-4)) return number_text(scaled, significant);
  int before = size >= 1 ? static_cast<int>(std::floor(std::log10(size) + 1e-12)) + 1 : 1;
  const int decimals = std::clamp(significant - before, 0, 9);
  std::string out = fmt::format("{:.{}f}", scaled, decimals);
  if (out.find('.') != std::string::npos) {
    while (out.back() == '0') out.pop_back();
    if (out.back() == '.') out.pop_back();
  }
  return out == "-0" ? "0" : out;
}

/// To this many digits: the prefix is chosen for what will be shown, "1 mV" and not "1000 uV".
double rounded(double value, int significant) {
  if (!std::isfinite(value)) return value;
  const std::string text = fmt::format("{:.{}e}", value, std::clamp(significant - 1, 0, 16));
  double out = value;
  std::from_chars(text.data(), text.data() + text.size(), out);
  return out;
}

struct Shown {
  double factor;
  std::string unit;
};

Shown shown_for(double scale, Unit unit) {
  const double size = std::abs(scale);
  if (unit == Unit::ratio) {
    if (size > 0 && size < 0.01) return {1e-6, "ppm"};
    return {1, "V/V"};
  }
  const UnitRow& row = rows[static_cast<std::size_t>(unit)];
  if (!row.prefixed || size == 0) return {1, std::string(row.symbol)};
  static constexpr std::array<std::pair<double, const char*>, 10> steps{{{1e12, "T"},
                                                                         {1e9, "G"},
                                                                         {1e6, "M"},
                                                                         {1e3, "k"},
                                                                         {1, ""},
                                                                         {1e-3, "m"},
                                                                         {1e-6, "u"},
                                                                         {1e-9, "n"},
                                                                         {1e-12, "p"},
                                                                         {1e-15, "f"}}};
  for (const auto& [factor, prefix] : steps)
    if (size >= factor * (1 - 5e-7)) return {factor, std::string(prefix) + std::string(row.symbol)};
  return {1e-15, "f" + std::string(row.symbol)};
}

}  // namespace

std::string format_like(double value, double scale, Unit unit, int significant) {
  if (!std::isfinite(value)) return "none";
  const Shown shown = shown_for(scale, unit);
  std::string out = scaled_text(value, shown.factor, significant);
  if (!shown.unit.empty()) out += " " + shown.unit;
  return out;
}

std::string format_quantity(double value, Unit unit, int significant) {
  return format_like(value, rounded(value, significant), unit, significant);
}

}  // namespace jigwright
