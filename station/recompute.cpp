// `jigwright audit --recompute`: every trial worked out again from what stands with it.
#include "sequencer/recompute.hpp"

#include <fmt/format.h>
#include <unistd.h>

#include <nlohmann/json.hpp>

#include "db/store.hpp"
#include "station/exit_codes.hpp"
#include "station/fail.hpp"
#include "station/recompute.hpp"

namespace jigwright {
namespace {

std::string page(const Recomputed& r) {
  std::string out = fmt::format(
      "{} trials worked out again from their raw readings agree to the last bit, {} do not.\n", r.agree, r.differ);
  if (r.differ > 0) out += fmt::format("The first that differs: {}\n", printable(r.first_difference));
  for (const auto& [reason, n] : r.left_out) out += fmt::format("{} not worked out again: {}\n", n, reason);
  return out;
}

std::string json(const Recomputed& r) {
  nlohmann::ordered_json out{{"agree", r.agree}, {"differ", r.differ}, {"first_difference", r.first_difference}};
  out["left_out"] = nlohmann::ordered_json::object();
  for (const auto& [reason, n] : r.left_out) out["left_out"][reason] = n;
  return out.dump(2, ' ', false, nlohmann::ordered_json::error_handler_t::replace) + "\n";
}

}  // namespace

int recompute(const RecomputeOptions& options) {
  StoreOptions reading;
  reading.access = StoreOptions::Access::read;
  auto store = Store::open(options.store, reading);
  if (!store) return fail(store.error());
  const bool live = !options.json && ::isatty(STDERR_FILENO) == 1;
  const auto result = recompute_all(store.value()->database(), [&](std::int64_t done) {
    if (live) fmt::print(stderr, "\r{} trials worked out again", done);
  });
  if (live) fmt::print(stderr, "\r{:<40}\r", "");
  if (!result) return fail(result.error());
  fmt::print("{}", options.json ? json(result.value()) : page(result.value()));
  return result.value().differ == 0 ? exit_go : exit_store;
}

}  // namespace jigwright
