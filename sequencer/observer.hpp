// The one narrow way that news leaves the sequencer, and the one way a person answers it. station/ implements both.
// Called on the io_context's thread; must not block.
#pragma once
#include <string>
#include <vector>

#include "base/finding.hpp"
#include "db/trial_record.hpp"
#include "fixtures/instruments.hpp"
#include "steps/setting.hpp"

namespace jigwright {

struct Progress {
  int nest{1};
  int setting{}, settings{};  ///< the one under way (from 0), and how many
  double elapsed_s{}, remaining_s{};
};

class Observer {
 public:
  virtual ~Observer() = default;
  virtual void trial_started(int nest, const TrialStart& start) = 0;
  virtual void setting_started(const Progress& progress, const std::string& step, const Setting& setting) = 0;
  /// A live value carries no judgement.
  virtual void reading(const Progress& progress, const Setting& setting, const Reading& reading) = 0;
  virtual void finding(int nest, const Metric& metric, const Limit* limit, const Judged& judged) = 0;
  /// After the record is durable; `record_fault` is set, and the outcome VOID, when it could not be made so.
  virtual void trial_ended(int nest, const TrialStart& start, const TrialEnd& end, const std::string& next_action,
                           const Error* record_fault) = 0;
  virtual void notice(int nest, const std::string& text) = 0;
};

class Person {
 public:
  virtual ~Person() = default;
  /// Yes = 1, no = 0, or the value. state refused when the person declines or nobody can be asked.
  virtual Task<Result<Reading>> ask(int nest, const Ask& question, Duration deadline) = 0;
  /// All trials are being ended: a question under way answers at once, with an Error of kind person.
  virtual void stop() {}
};

}  // namespace jigwright
