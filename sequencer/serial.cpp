#include "sequencer/serial.hpp"

#include <algorithm>
#include <cctype>
#include <vector>

namespace jigwright {
namespace {

constexpr std::string_view alphanumeric = "0123456789ABCDEFGHIJKLMNOPQRSTUVWXYZ*";

struct System {
  const char* name;
  CheckDigit check;
  int modulus, radix;
  int characters;  ///< of the check
};
constexpr System systems[] = {
    {"none", CheckDigit::none, 0, 0, 0},
    {"iso7064 mod 11-2", CheckDigit::iso7064_11_2, 11, 2, 1},
    {"iso7064 mod 37-2", CheckDigit::iso7064_37_2, 37, 2, 1},
    {"iso7064 mod 97-10", CheckDigit::iso7064_97_10, 97, 10, 2},
    {"gs1 mod 10", CheckDigit::gs1_10, 10, 3, 1},
};

const System& system_of(CheckDigit check) {
  return systems[static_cast<std::size_t>(check)];
}

std::vector<int> values_of(const System& system, std::string_view text) {
  const std::size_t alphabet = system.modulus == 37 ? 36 : 10;
  std::vector<int> out;
  for (const char c : text)
    if (const auto at = alphanumeric.substr(0, alphabet).find(c); at != std::string_view::npos)
      out.push_back(static_cast<int>(at));
  return out;
}

/// ISO/IEC 7064: each value is added and the sum multiplied by the radix, modulo; the check makes the whole congruent
/// to 1.
std::string pure_system(const System& system, const std::vector<int>& values) {
  int sum = 0;
  for (const int v : values) sum = (sum + v) * system.radix % system.modulus;
  if (system.characters == 2) {
    sum = sum * system.radix % system.modulus;
    const int check = (system.modulus + 1 - sum) % system.modulus;
    return {static_cast<char>('0' + check / 10), static_cast<char>('0' + check % 10)};
  }
  const int check = (system.modulus + 1 - sum) % system.modulus;
  if (system.modulus == 11) return std::string(1, check == 10 ? 'X' : static_cast<char>('0' + check));
  return std::string(1, alphanumeric[static_cast<std::size_t>(check)]);
}

/// GS1: weights 3 and 1 from the right.
std::string gs1(const std::vector<int>& values) {
  int sum = 0, weight = 3;
  for (auto v = values.rbegin(); v != values.rend(); ++v, weight = 4 - weight) sum += *v * weight;
  return std::string(1, static_cast<char>('0' + (10 - sum % 10) % 10));
}

bool fits(char pattern, char c) {
  const auto byte = static_cast<unsigned char>(c);
  const bool digit = std::isdigit(byte) != 0, letter = byte < 128 && std::isupper(byte) != 0;
  if (pattern == '#') return digit;
  if (pattern == '@') return letter;
  if (pattern == '%') return digit || letter;
  return pattern == c;
}

/// The scan is as long as the pattern, or shorter, and fits as far as it goes.
bool begins_as(const std::string& pattern, const std::string& scan) {
  return scan.size() <= pattern.size() &&
         std::equal(scan.begin(), scan.end(), pattern.begin(), [](char c, char p) { return fits(p, c); });
}

bool matches(const std::string& pattern, const std::string& scan) {
  return pattern.empty() || (scan.size() == pattern.size() && begins_as(pattern, scan));
}

bool sound(const SerialForm& form, const std::string& scan) {
  if (!matches(form.pattern, scan)) return false;
  const auto length = static_cast<std::size_t>(system_of(form.check).characters);
  if (length == 0) return true;
  if (scan.size() <= length) return false;
  const auto check = check_characters(form.check, std::string_view(scan).substr(0, scan.size() - length));
  return check && scan.ends_with(*check);
}

}  // namespace

std::optional<std::string> check_characters(CheckDigit check, std::string_view text) {
  const System& system = system_of(check);
  const auto values = values_of(system, text);
  if (values.empty() || check == CheckDigit::none) return std::nullopt;
  return check == CheckDigit::gs1_10 ? gs1(values) : pure_system(system, values);
}

SerialFault fault_of(const SerialForm& form, const std::string& scan) {
  if (form.pattern.empty() && form.check == CheckDigit::none) return SerialFault::none;
  if (sound(form, scan)) return SerialFault::none;
  for (std::size_t at = 1; at < scan.size(); ++at)
    if (sound(form, scan.substr(0, at)) && sound(form, scan.substr(at))) return SerialFault::two_together;
  if (matches(form.pattern, scan)) return SerialFault::check_digit;
  return !scan.empty() && begins_as(form.pattern, scan) ? SerialFault::too_short : SerialFault::not_alike;
}

SerialForm read_serial_form(const Node& table, Faults& faults) {
  TableReader r(table, "[serial]", faults);
  SerialForm out;
  if (const auto pattern = r.text("pattern")) {
    out.pattern = pattern->value;
    if (out.pattern.find_first_of("#@%") == std::string::npos)
      r.fault(pattern->region, "\"pattern\": \"" + out.pattern + "\" fits one serial only",
              "write # for a digit, @ for a capital letter, % for either, as in \"AB-####\"");
  }
  if (const auto check = r.text("check_digit")) {
    const auto found =
        std::find_if(std::begin(systems), std::end(systems), [&](const System& s) { return check->value == s.name; });
    if (found != std::end(systems)) out.check = found->check;
    if (found == std::end(systems))
      r.fault(check->region, "\"check_digit\": \"" + check->value + "\" is not known",
              "write \"none\", \"iso7064 mod 11-2\", \"iso7064 mod 37-2\", \"iso7064 mod 97-10\" or \"gs1 mod 10\"");
  }
  r.finish();
  return out;
}

}  // namespace jigwright
