#include "db/speaks.hpp"

namespace jigwright {

std::optional<std::size_t> speaking_trial(std::span<const PastTrial> trials) {
  std::optional<std::size_t> speaks;
  bool barred = false;
  for (std::size_t i = 0; i < trials.size(); ++i) {
    if (trials[i].judgement == Judgement::no_go) barred = barred || !trials[i].reviewed;
    if (trials[i].judgement == Judgement::go && barred) continue;
    speaks = i;
  }
  return speaks;
}

}  // namespace jigwright
