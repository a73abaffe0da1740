// The form of a serial, as the plan states it: a pattern and a check digit, so that half a scan, or two scans run
// together, is never taken for a board. Pure; any thread.
#pragma once
#include <cstdint>
#include <optional>
#include <string>
#include <string_view>

#include "base/error.hpp"
#include "base/toml.hpp"

namespace jigwright {

/// Check digits at a serial's end. ISO/IEC 7064 pure systems and the GS1 General Specifications, section 7.9 (clause
/// numbers from memory).
enum class CheckDigit : std::uint8_t {
  none,
  iso7064_11_2,   ///< over the digits; 0-9 or X
  iso7064_37_2,   ///< over digits and letters; 0-9, A-Z or *
  iso7064_97_10,  ///< over the digits; two digits
  gs1_10,         ///< over the digits
};

/// The check characters that follow `text`; characters of another alphabet (dashes, a product's letters before digits)
/// are passed over. nullopt when no character counts.
std::optional<std::string> check_characters(CheckDigit check, std::string_view text);

struct SerialForm {
  std::string pattern;  ///< "TB3-####": # a digit, @ a capital letter, % either, others themselves; empty = any
  CheckDigit check{CheckDigit::none};
};

enum class SerialFault : std::uint8_t { none, not_alike, too_short, two_together, check_digit };

/// What is wrong with a scan that should be a serial.
SerialFault fault_of(const SerialForm& form, const std::string& scan);

/// Keys of the plan's table [serial].
SerialForm read_serial_form(const Node& table, Faults& faults);

}  // namespace jigwright
