// How the sequencer keeps a trial: a durable mark when it starts, one durable transaction when it ends. The store's
// calls block on the disk, so they run on a thread of their own, the only writer of the process; virtual time waits for
// it.
#pragma once
#include <functional>
#include <memory>

#include "db/trial_log.hpp"
#include "fixtures/clock.hpp"

namespace jigwright {

class Recorder {
 public:
  virtual ~Recorder() = default;
  /// @return the open trial, for finish()
  virtual Task<Result<OpenTrial>> begin(const TrialStart& start) = 0;
  /// Any other write to the store, on the store's thread in its turn. The work must not touch what others use.
  virtual Task<Result<Done>> write(std::function<Result<Done>()> work) = 0;
  /// Returns once the record is durable.
  virtual Task<Result<Done>> finish(const OpenTrial& trial, const TrialEnd& end) = 0;
};

/// Keeps nothing: for proofs of a plan and benchmarks.
std::unique_ptr<Recorder> make_null_recorder();
/// @param log  outlives the recorder and is used by nobody else meanwhile
std::unique_ptr<Recorder> make_recorder(TrialLog& log, Clock& clock, asio::io_context& io);

}  // namespace jigwright
