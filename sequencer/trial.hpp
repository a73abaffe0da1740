// One trial, from scan to judgement. This is the main loop of the program:
//
//     mark the start in the store -> safe state -> for each phase and step: play its settings, reduce them to findings,
//     judge each, stop where that must be -> safe state on every path -> judge all -> record, durably -> tell.
//
// Several nests may run trials at once over the same bench; each trial is a coroutine of its own. One thread: the
// io_context's.
#pragma once
#include <memory>
#include <string>

#include "fixtures/instruments.hpp"
#include "sequencer/evaluation.hpp"
#include "sequencer/leases.hpp"
#include "sequencer/observer.hpp"
#include "sequencer/plan.hpp"
#include "sequencer/player.hpp"
#include "sequencer/recorder.hpp"

namespace jigwright {

/// What is the same for every trial of a run.
struct TrialSetup {
  std::string station;
  std::string operator_name;
  std::string program;
  Origin origin{Origin::measured};
  Purpose purpose{Purpose::board};
  std::vector<Document> documents;  ///< beyond plan, jig and limits: the scenario, dialects
  /// UTC now, microseconds since 1970: the stamp of a trial. A test's fake clock may stand in.
  std::function<std::int64_t()> utc_us;
};

struct TrialResult {
  TrialStart start;
  TrialEnd end;
  Uuid uuid{};           ///< of the record, once it was begun
  bool recorded{false};  ///< only a recorded trial may be shown as GO
};

class Trials {
 public:
  Trials(asio::io_context& io, Bench& bench, std::shared_ptr<const ReadyPlan> plan, Observer& observer, Person& person,
         Recorder& recorder, TrialSetup setup);
  ~Trials();

  /// One trial of one board in one nest (from 1). Never throws; every failure is in the result.
  Task<TrialResult> run(int nest, std::string serial, std::string order);

  /// Ends all trials: the reason goes into their records, and each still makes its nest safe. Also from a signal
  /// handler that runs on the io_context.
  void stop(std::string reason);
  bool stopped() const { return stop_.set; }
  /// Whose trials the next ones are.
  void sign(std::string operator_name) { setup_.operator_name = std::move(operator_name); }

 private:
  class Body;
  TrialStart start_of(int nest, std::string serial, std::string order) const;
  Task<Result<Done>> identify();
  Task<Done> play(Body& body, Player& player, int nest, const std::string& serial, int attempt);
  void conclude(const Evaluation& evaluation, const std::string& unsafe, TrialEnd& end) const;
  std::string next_action(const Outcome& outcome) const;

  asio::io_context& io_;
  Bench& bench_;
  std::shared_ptr<const ReadyPlan> plan_;
  Observer& observer_;
  Person& person_;
  Recorder& recorder_;
  TrialSetup setup_;
  Leases leases_;
  SwitchingRules rules_;
  StopSignal stop_;
  std::vector<InstrumentIdentity> identities_;
  bool identified_{false};
};

}  // namespace jigwright
