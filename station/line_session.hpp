// The line's conversation: what each scan means at each moment, what the screen shows, and what is asked of the rest of
// the program. It does no input or output of its own: a LineHost stands for the store, the jig and the clock, so that
// tests play whole shifts. One thread.
//
//     TEST code -> badge -> wrist strap -> ready <-> trying
//                                           | ^
//                                           | +--- stopped: an engineer and a reason
//                                           +----- reel label: place, then first board
//                                           +----- END: notes, hand-over sheet, ended
#pragma once
#include <cstdint>
#include <deque>
#include <optional>
#include <string>
#include <vector>

#include "db/act.hpp"
#include "db/boards.hpp"
#include "db/feeds.hpp"
#include "db/line_questions.hpp"
#include "db/people.hpp"
#include "sequencer/plan.hpp"
#include "sequencer/trial.hpp"
#include "station/texts.hpp"

namespace jigwright {

enum class Shape : std::uint8_t { none, disc, square, triangle, bar };

/// What a person at the jig sees.
struct LineView {
  std::string word;  ///< large; empty = none
  Shape shape{Shape::none};
  std::vector<std::string> lines;  ///< what the word is about
  std::string action;              ///< what to do with the board
  std::string prompt;              ///< what is wanted next
  std::string live;                ///< of the trial under way
  std::string state;               ///< the shift, in a sentence
  bool secret{false};              ///< what is typed must not be shown
};

/// Whether files in force and files at hand are the same.
struct AdoptedNow {
  bool any{false};        ///< a revision is in force
  std::string differing;  ///< "limits"; empty = nothing
  std::int64_t number{};
};

class LineHost {
 public:
  virtual ~LineHost() = default;
  virtual std::int64_t now_us() = 0;
  virtual BoardNow board(const std::string& serial) = 0;
  virtual bool reel_known(const std::string& label) = 0;
  virtual OrderCounts order(const std::string& name) = 0;
  virtual AdoptedNow adopted(const std::string& order) = 0;
  virtual std::optional<PersonNow> person(const std::string& badge_or_name) = 0;
  virtual bool anybody_registered() = 0;
  virtual bool password_fits(const PersonNow& person, const std::string& password) = 0;
  /// Boards of the order tried with the files at hand since an engineer last approved such; nullopt = approved.
  virtual std::optional<std::int64_t> unapproved(const std::string& order) = 0;
  /// The stop that no engineer has lifted, of an earlier run of this station; empty = none.
  virtual std::string stop_in_force() = 0;
  virtual void start_trial(const std::string& serial, const std::string& order) = 0;
  virtual void abort_trial() = 0;
  /// Written by the store's thread; a failure comes back through LineSession::record_failed().
  virtual void record(const ActRecord& act) = 0;
  virtual void change_reel(const FeedChange& change) = 0;
  /// @return the file's name
  virtual std::string hand_over(const std::string& sheet) = 0;
  virtual void show(const LineView& view) = 0;
  virtual void quit() = 0;
};

struct LineSetup {
  const ReadyPlan& plan;
  std::string station;
  std::string order;  ///< empty = of each board's own
};

class LineSession {
 public:
  LineSession(LineHost& host, const Texts& texts, LineSetup setup);

  void begin();
  /// A line from scanner, keyboard or foot switch; an empty one is the foot switch.
  void take(std::string scan);
  void progress(const Progress& progress, const std::string& step);
  void trial_ended(const TrialStart& start, const TrialEnd& end, const std::string& next_action,
                   const Error* record_fault);
  void record_failed(const Error& error);
  void reel_changed(const Result<FeedChanged>& changed);

  bool ended() const { return state_ == State::ended; }
  bool logged_in() const { return !who_.empty(); }
  const std::string& who() const { return who_; }

 private:
  enum class State {
    keyboard,
    badge,
    password,
    esd,
    ready,
    trying,
    reel_label,
    reel_place,
    reel_first,
    stopped,
    stop_password,
    stop_reason,
    notes,
    dead,
    ended
  };
  struct Shift {
    int tried{0}, go{0}, no_go{0}, voids{0}, first{0}, first_go{0}, refused{0};
  };

  void enter(State state);
  void say(std::string word, Shape shape, std::vector<std::string> lines, std::string action);
  void refuse(std::string line);
  void show();
  std::string prompt() const;
  std::string state_sentence();

  void take_badge(const std::string& scan);
  void take_password(const std::string& typed);
  void take_esd(const std::string& scan);
  void take_ready(const std::string& scan);
  void take_trying(const std::string& scan);
  void take_serial(const std::string& scan);
  std::optional<std::string> not_in_force(const std::string& order);
  std::optional<std::string> misplaced(const BoardNow& board, const std::string& scan, std::string& order);
  bool is_serial(const std::string& scan) const;
  std::string barred(Bar bar, const BoardNow& board) const;
  void take_reel_first(const std::string& scan);
  void take_stopped(const std::string& scan);
  void take_stop_reason(const std::string& typed);
  void log_in();
  void stop(const std::string& cause, const std::string& kind);
  void after_trial(const TrialEnd& end);
  void end_shift(const std::string& notes);
  ActRecord act(const std::string& kind) const;

  LineHost& host_;
  const Texts& texts_;
  LineSetup setup_;
  State state_{State::keyboard};
  LineView view_;
  Shift shift_;
  std::string who_, serial_, order_, reel_, place_, cause_, stop_kind_, stop_text_;
  PersonNow person_;               ///< whose password is awaited
  std::optional<BoardNow> board_;  ///< under trial, as it stood before
  int same_cause_{0};
  bool engineer_{false};  ///< is logged in
};

}  // namespace jigwright
