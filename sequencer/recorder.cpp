#include "sequencer/recorder.hpp"

namespace jigwright {
namespace {

class NullRecorder final : public Recorder {
 public:
  Task<Result<std::int64_t>> begin(const TrialStart&) override { co_return std::int64_t{0}; }
  Task<Result<Done>> finish(std::int64_t, const TrialEnd&) override { co_return Done{}; }
};

}  // namespace

std::unique_ptr<Recorder> make_null_recorder() {
  return std::make_unique<NullRecorder>();
}

}  // namespace jigwright
