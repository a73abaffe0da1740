// What a person or a program sees of trials as they run: a live line on a terminal, plain lines elsewhere, or one JSON
// object a line. And the person who answers the plan's questions. Called on the io_context's thread.
#pragma once
#include <cstdio>
#include <memory>
#include <string>
#include <utility>
#include <vector>

#include "sequencer/observer.hpp"

namespace jigwright {

/// Counts of a run, for its last line and its exit code.
struct Tally {
  int go{}, no_go{}, voids{}, not_recorded{};
  int trials() const { return go + no_go + voids; }
};

class Watcher : public Observer {
 public:
  virtual const Tally& tally() const = 0;
  /// After the last trial. `wall_s` is the time on the computer's own clock.
  virtual void run_ended(double wall_s) = 0;
};

enum class Detail { findings, boards, nothing };

/// One line a finding, or one a board; on a terminal a live line besides.
std::unique_ptr<Watcher> make_text_watcher(std::FILE* out, Detail detail, bool terminal);
/// {"event": "trial_started" | "setting" | "finding" | "trial_ended" | "notice" | "run_ended", ...}; values in SI
/// units, a value that is none is null.
std::unique_ptr<Watcher> make_json_watcher(std::FILE* out);

/// Answers from `--answer STEP=VALUE` first; then asks: on a terminal by a prompt, with `json` by an event "question"
/// and a line {"answer": true | false | NUMBER} on standard input; else nobody can be asked (state refused).
std::unique_ptr<Person> make_person(asio::io_context& io, Clock& clock,
                                    std::vector<std::pair<std::string, std::string>> answers, bool json, bool terminal);

}  // namespace jigwright
