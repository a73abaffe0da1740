// How the sequencer keeps a trial: a durable mark when it starts, one durable transaction when it ends. The store's
// calls block on the disk, so they run on a thread of their own, the only writer of the process; virtual time waits for
// it.
#pragma once
#include <memory>

#include "db/trial_record.hpp"
#include "fixtures/clock.hpp"

namespace jigwright {

class Store;

class Recorder {
 public:
  virtual ~Recorder() = default;
  /// @return the open trial, for finish()
  virtual Task<Result<std::int64_t>> begin(const TrialStart& start) = 0;
  /// Returns once the record is durable.
  virtual Task<Result<Done>> finish(std::int64_t trial, const TrialEnd& end) = 0;
};

/// Keeps nothing: for proofs of a plan and benchmarks.
std::unique_ptr<Recorder> make_null_recorder();
/// @param store  outlives the recorder and is used by nobody else meanwhile
std::unique_ptr<Recorder> make_store_recorder(Store& store, Clock& clock, asio::io_context& io);

}  // namespace jigwright
