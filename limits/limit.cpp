#include "limits/limit.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

namespace jigwright {
namespace {

Error bad(std::string what, std::string to_do) {
  return Error{Error::Kind::file, std::move(what), {}, std::move(to_do)};
}

std::string shown(double value, Unit unit) {
  return format_quantity(value, unit, 6);
}

bool finite(const Bounds& b) {
  return (!b.low || std::isfinite(*b.low)) && (!b.high || std::isfinite(*b.high));
}

bool crossed(const Bounds& b) {
  return b.low && b.high && !(*b.low < *b.high);
}

bool holds(const Bounds& b, double value) {
  return (!b.low || value >= *b.low) && (!b.high || value <= *b.high);
}

std::optional<Error> fault_of_specification(const Limit& limit, Unit unit) {
  const Bounds& s = limit.specification;
  if (!s.low && !s.high) return bad("the specification has no bound", "give low, high or both");
  if (!finite(s)) return bad("a bound of the specification is no number", "give low, high or both");
  if (crossed(s))
    return bad(fmt::format("low {} is not below high {}", shown(*s.low, unit), shown(*s.high, unit)),
               "exchange them, or mend the one that is wrong");
  return std::nullopt;
}

std::optional<Error> fault_of_band(const Limit& limit, Unit unit) {
  if (!(limit.budget_U >= 0) || !std::isfinite(limit.budget_U))
    return bad("the budgeted uncertainty is below zero", "give the expanded uncertainty (k = 2)");
  if (!(limit.budget_of_reading >= 0 && limit.budget_of_reading < 1))
    return bad("the part of the uncertainty that grows with the reading is not from 0 to 1",
               "give a ratio, as in \"1 %\"");
  if (limit.guard == Guard::uncertainty && !(limit.share >= 0 && limit.share <= 3))
    return bad("the share of the uncertainty is not from 0 to 3", "1 takes the whole uncertainty off each bound");
  if (limit.guard == Guard::inset && !(limit.width >= 0 && std::isfinite(limit.width)))
    return bad(fmt::format("the inset {} would widen the specification", shown(limit.width, unit)),
               "an inset is zero or more; the test limit may not lie outside the specification");
  return std::nullopt;
}

Bounds inset(const Bounds& specification, double width) {
  Bounds b;
  if (specification.low) b.low = *specification.low + width;
  if (specification.high) b.high = *specification.high - width;
  return b;
}

/// The specification's bound of larger size: the guard band is as wide as the budget is there.
double larger_bound(const Bounds& b) {
  return std::max(std::abs(b.low.value_or(0)), std::abs(b.high.value_or(0)));
}

Error no_room(const Limit& limit, Unit unit) {
  const double room = *limit.specification.high - *limit.specification.low;
  if (limit.guard == Guard::inset)
    return bad(fmt::format("the inset of {} at each bound leaves nothing of the specification's room of {}",
                           shown(limit.width, unit), shown(room, unit)),
               "give an inset of less than half the room");
  return bad(fmt::format("the jig is too uncertain for this specification: U = {}, room = {}",
                         shown(budget_at(limit, larger_bound(limit.specification)), unit), shown(room, unit)),
             fmt::format("the guard band of {} at each bound leaves nothing; measure better, take a smaller share, or "
                         "type the test limit with a reason",
                         shown(limit.width, unit)));
}

Result<Limit> inset_limit(Limit limit, Unit unit) {
  if (limit.guard == Guard::uncertainty)
    limit.width = limit.share * budget_at(limit, larger_bound(limit.specification));
  if (limit.guard == Guard::none) limit.width = 0;
  limit.applied = inset(limit.specification, limit.width);
  if (crossed(limit.applied)) return no_room(limit, unit);
  return limit;
}

std::optional<Error> fault_of_side(std::string_view side, const std::optional<double>& specification,
                                   const std::optional<double>& typed, bool inside, Unit unit) {
  if (specification && !typed)
    return bad(fmt::format("the specification has a {0} bound, the typed test limit has none", side),
               fmt::format("add {} to the test limit", side));
  if (specification && typed && !inside)
    return bad(fmt::format("the typed test limit's {} {} lies outside the specification's {}", side,
                           shown(*typed, unit), shown(*specification, unit)),
               "a board that fails the specification would be GO: write a bound inside it");
  return std::nullopt;
}

Result<Limit> typed_limit(Limit limit, Unit unit) {
  const Bounds& s = limit.specification;
  const Bounds& t = limit.applied;
  if (!finite(t)) return bad("a bound of the test limit is no number", {});
  if (crossed(t))
    return bad(
        fmt::format("the test limit's low {} is not below its high {}", shown(*t.low, unit), shown(*t.high, unit)),
        "exchange them, or mend the one that is wrong");
  if (auto e = fault_of_side("low", s.low, t.low, s.low && t.low && *t.low >= *s.low, unit)) return *e;
  if (auto e = fault_of_side("high", s.high, t.high, s.high && t.high && *t.high <= *s.high, unit)) return *e;
  limit.width = std::max(s.low ? *t.low - *s.low : 0.0, s.high ? *s.high - *t.high : 0.0);
  return limit;
}

/// Distance to a bound as a share of the room between nominal and the bound.
double share_left(double distance, double room, double instead) {
  const double scale = room > 0 ? room : instead;
  if (scale > 0) return distance / scale;
  return distance > 0 ? 1 : distance < 0 ? -1 : 0;
}

}  // namespace

double budget_at(const Limit& limit, double value) {
  return limit.budget_U + limit.budget_of_reading * std::abs(value);
}

Result<Limit> apply_guard(Limit limit, Unit unit) {
  if (auto e = fault_of_specification(limit, unit)) return *e;
  if (auto e = fault_of_band(limit, unit)) return *e;
  auto applied =
      limit.guard == Guard::typed ? typed_limit(std::move(limit), unit) : inset_limit(std::move(limit), unit);
  if (!applied) return applied;
  Limit& done = applied.value();
  const Bounds& s = done.specification;
  if (std::isnan(done.nominal) && s.low && s.high) done.nominal = *s.low / 2 + *s.high / 2;
  if (!std::isnan(done.nominal) && !holds(s, done.nominal))
    return bad(fmt::format("the nominal {} lies outside the specification", shown(done.nominal, unit)),
               "the nominal is what a perfect board shows");
  return applied;
}

double margin(const Limit& limit, double value) {
  const Bounds& b = limit.applied;
  const double none = std::numeric_limits<double>::quiet_NaN();
  if (!std::isfinite(value) || (!b.low && !b.high)) return none;
  const bool nominal = std::isfinite(limit.nominal);
  double left = std::numeric_limits<double>::infinity();
  if (b.low) {
    const double instead = *b.low != 0 ? std::abs(*b.low) : limit.width;
    left = std::min(left, share_left(value - *b.low, nominal ? limit.nominal - *b.low : 0, instead));
  }
  if (b.high) {
    const double instead = *b.high != 0 ? std::abs(*b.high) : limit.width;
    left = std::min(left, share_left(*b.high - value, nominal ? *b.high - limit.nominal : 0, instead));
  }
  return left;
}

}  // namespace jigwright
