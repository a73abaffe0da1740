#include "sequencer/arrange.hpp"

#include <algorithm>

namespace jigwright {
namespace {

struct Cost {
  double time_s{};
  int moved{};
  bool operator<(const Cost& o) const { return time_s != o.time_s ? time_s < o.time_s : moved < o.moved; }
};

Cost step_cost(const NestState& from, const Setting& to, const SwitchingRules& rules) {
  const Transition t = transition(from, to, rules);
  return {transition_s(t, rules), moves(t)};
}

Cost total_cost(NestState state, std::span<const Setting> settings, const SwitchingRules& rules) {
  Cost total;
  for (const Setting& s : settings) {
    const Cost c = step_cost(state, s, rules);
    total.time_s += c.time_s;
    total.moved += c.moved;
    state = after(s);
  }
  return total;
}

/// Nearest neighbour, ties by the given order.
std::vector<Setting> nearest_first(NestState state, std::span<const Setting> group, const SwitchingRules& rules) {
  std::vector<Setting> out;
  std::vector<bool> used(group.size(), false);
  while (out.size() < group.size()) {
    std::size_t best = group.size();
    Cost least;
    for (std::size_t i = 0; i < group.size(); ++i) {
      if (used[i]) continue;
      const Cost c = step_cost(state, group[i], rules);
      if (best == group.size() || c < least) {
        best = i;
        least = c;
      }
    }
    used[best] = true;
    out.push_back(group[best]);
    state = after(group[best]);
  }
  return out;
}

}  // namespace

std::vector<Setting> arrange(std::vector<Setting> settings, const SwitchingRules& rules) {
  // Within a step and phase the given order of groups stands: only neighbours of one group are permuted.
  std::stable_sort(settings.begin(), settings.end(), [](const Setting& a, const Setting& b) {
    return a.phase != b.phase ? a.phase < b.phase : a.step < b.step;
  });
  NestState state;
  for (std::size_t first = 0; first < settings.size();) {
    std::size_t last = first + 1;
    auto same = [&](const Setting& s) {
      return s.phase == settings[first].phase && s.step == settings[first].step && s.group == settings[first].group;
    };
    if (settings[first].group >= 0)
      while (last < settings.size() && same(settings[last])) ++last;
    const std::span<const Setting> group(&settings[first], last - first);
    if (group.size() > 1) {
      std::vector<Setting> better = nearest_first(state, group, rules);
      if (total_cost(state, better, rules) < total_cost(state, group, rules))
        std::move(better.begin(), better.end(), settings.begin() + static_cast<std::ptrdiff_t>(first));
    }
    state = after(settings[last - 1]);
    first = last;
  }
  return settings;
}

std::optional<std::size_t> pick(std::span<const Waiting> waiting, std::uint32_t busy) {
  std::vector<std::size_t> by_age(waiting.size());
  for (std::size_t i = 0; i < by_age.size(); ++i) by_age[i] = i;
  std::sort(by_age.begin(), by_age.end(),
            [&](std::size_t a, std::size_t b) { return waiting[a].order < waiting[b].order; });
  std::uint32_t spoken_for = busy;
  for (const std::size_t i : by_age) {
    if ((waiting[i].resources & spoken_for) == 0) return i;
    spoken_for |= waiting[i].resources;
  }
  return std::nullopt;
}

}  // namespace jigwright
