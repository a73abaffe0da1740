#include "steps/step.hpp"

namespace jigwright {

const BoardFacts::Range* BoardFacts::range(std::string_view id) const {
  for (const Range& r : ranges)
    if (r.id == id) return &r;
  return nullptr;
}

}  // namespace jigwright
