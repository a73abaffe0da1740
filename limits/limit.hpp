// A limit: the customer's specification, the guard band taken off it for the uncertainty of the test, and the test
// limit that boards are judged by. Arithmetic only; any thread.
#pragma once
#include <cstdint>
#include <limits>
#include <optional>
#include <string>

#include "base/error.hpp"
#include "base/finding.hpp"

namespace jigwright {

/// A one-sided bound leaves the other empty. Ends belong to the interval: a value on the bound is met.
struct Bounds {
  std::optional<double> low;
  std::optional<double> high;
};

/// How the test limit comes from the specification.
enum class Guard : std::uint8_t {
  uncertainty = 0,  ///< inset by share * U (JCGM 106:2012 8.3.2 guarded acceptance; share 1 = ILAC-G8 w = U)
  inset = 1,        ///< inset by a stated amount
  typed = 2,        ///< test limits written out, with a reason
  none = 3,         ///< simple acceptance: the specification itself, with a reason
};

struct Limit {
  Bounds specification;
  double nominal{std::numeric_limits<double>::quiet_NaN()};  ///< middle of the specification when the file is silent
  Guard guard{Guard::uncertainty};
  double share{1};             ///< for Guard::uncertainty
  double budget_U{};           ///< budgeted expanded uncertainty, k = 2, same for every board of this revision ...
  double budget_of_reading{};  ///< ... and the part of it that grows with the reading's size, a ratio
  double width{};              ///< guard band in force at each bound (typed: the larger of the two)
  Bounds applied;              ///< the test limit
  std::string reason;          ///< for typed and none
};

/// The budgeted expanded uncertainty at a value: budget_U + budget_of_reading * |value|, the form in which instruments
/// state their accuracy.
double budget_at(const Limit& limit, double value);

/// Fills `width` and `applied` of a limit whose other fields are set; the caller has put the stated amount of
/// Guard::inset into `width`, and the test limits of Guard::typed into `applied`. A silent nominal becomes the middle
/// of a two-sided specification. Error kind file when the guard band crosses the limits ("the jig is too uncertain for
/// this specification: U = ..., room = ...") or typed limits lie outside the specification, bounds are crossed or
/// missing, or the nominal lies outside.
Result<Limit> apply_guard(Limit limit, Unit unit);

/// Share of the room between nominal and the nearer applied bound that is left: 1 at nominal, 0 on the bound, negative
/// beyond. One-sided without nominal: margin over |bound| (or over the guard width when the bound is 0; 1, 0 or -1 when
/// that is 0 too).
/// NaN for a limit without bounds or a value that is none.
double margin(const Limit& limit, double value);

}  // namespace jigwright
