// `jigwright audit --recompute`.
#pragma once
#include <string>

namespace jigwright {

struct RecomputeOptions {
  std::string store;
  bool json{false};
};
/// Works every stored trial out again; exit_store when one does not agree.
int recompute(const RecomputeOptions& options);

}  // namespace jigwright
