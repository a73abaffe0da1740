#include "station/line_session.hpp"

#include <fmt/format.h>

#include <algorithm>

#include "base/source.hpp"
#include "db/week.hpp"
#include "station/cards.hpp"
#include "station/words.hpp"

namespace jigwright {
namespace {

constexpr const char* stop_by_cause = "cause";
constexpr const char* stop_by_article = "first article";

std::string trimmed(std::string text) {
  const auto blank = [](char c) { return c == ' ' || c == '\r' || c == '\n' || c == '\t'; };
  while (!text.empty() && blank(text.back())) text.pop_back();
  while (!text.empty() && blank(text.front())) text.erase(0, 1);
  return text;
}

/// A password may begin or end with blanks.
std::string without_end(std::string text) {
  while (!text.empty() && (text.back() == '\r' || text.back() == '\n')) text.pop_back();
  return text;
}

const FindingRow* decider(const TrialEnd& end) {
  const int at = end.outcome.deciding;
  return at >= 0 && at < static_cast<int>(end.findings.size()) ? &end.findings[static_cast<std::size_t>(at)] : nullptr;
}

/// What two boards in a row may have in common.
std::string cause_of(const TrialEnd& end) {
  if (end.outcome.judgement == Judgement::go) return {};
  if (const FindingRow* row = decider(end)) return row->metric.name.step + ": " + row->metric.name.name;
  return end.outcome.void_reason;
}

}  // namespace

LineSession::LineSession(LineHost& host, const Texts& texts, LineSetup setup)
    : host_(host), texts_(texts), setup_(std::move(setup)) {
  order_ = setup_.order;
}

void LineSession::begin() {
  enter(State::keyboard);
}

/// A store that can't record or answer ends the line: nothing but the end of the program leads on from there.
void LineSession::enter(State state) {
  if (state_ == State::dead && state != State::ended) return show();
  state_ = state;
  view_.secret = state == State::password || state == State::stop_password;
  view_.live.clear();
  show();
}

void LineSession::say(std::string word, Shape shape, std::vector<std::string> lines, std::string action) {
  if (state_ == State::dead) return;
  view_.word = std::move(word);
  view_.shape = shape;
  view_.lines = std::move(lines);
  view_.action = std::move(action);
}

void LineSession::refuse(std::string line) {
  ++shift_.refused;
  say(texts_.say("refused"), Shape::bar, {std::move(line)}, {});
  show();
}

void LineSession::show() {
  view_.prompt = prompt();
  view_.state = state_sentence();
  host_.show(view_);
}

std::string LineSession::prompt() const {
  switch (state_) {
    case State::keyboard:
      return texts_.say("test_code");
    case State::badge:
      return texts_.say("log_in");
    case State::password:
    case State::stop_password:
      return texts_.say("password", {{"name", person_.name}});
    case State::esd:
      return texts_.say("esd");
    case State::ready:
      return texts_.say("ready");
    case State::trying:
      return texts_.say("trying", {{"serial", serial_}});
    case State::reel_label:
      return texts_.say("reel_scan");
    case State::reel_place:
      return texts_.say("reel_place", {{"reel", reel_}});
    case State::reel_first:
      return texts_.say("reel_first", {{"reel", reel_}, {"place", place_}});
    case State::stopped:
      return texts_.say("stop_engineer");
    case State::stop_reason:
      return texts_.say(stop_kind_ == stop_by_article ? "approve" : "stop_reason");
    case State::notes:
      return texts_.say("hand_over_notes");
    case State::dead:
      return texts_.say("call_engineer");
    case State::ended:
      return {};
  }
  return {};
}

std::string LineSession::state_sentence() {
  if (!logged_in()) return {};
  std::string out = texts_.say("shift_none");
  if (shift_.tried > 0) {
    const double yield = shift_.first == 0 ? 0 : 100.0 * shift_.first_go / shift_.first;
    out = texts_.say("shift", {{"tried", std::to_string(shift_.tried)},
                               {"go", std::to_string(shift_.go)},
                               {"no_go", std::to_string(shift_.no_go)},
                               {"voids", std::to_string(shift_.voids)},
                               {"yield", shift_.first == 0 ? "-" : fmt::format("{:.0f} %", yield)}});
  }
  if (order_.empty()) return out;
  const OrderCounts tally = host_.order(order_);
  if (tally.all == 0) return out;
  return out + " " +
         texts_.say("order_left", {{"order", order_},
                                   {"done", std::to_string(tally.go)},
                                   {"all", std::to_string(tally.all)},
                                   {"left", std::to_string(tally.all - tally.go)}});
}

void LineSession::take(std::string scan) {
  const std::string typed = without_end(scan);
  scan = trimmed(std::move(scan));
  const auto card = card_of(scan);
  switch (state_) {
    case State::keyboard:
      if (card == Card::test) return say({}, Shape::none, {}, {}), enter(State::badge);
      if (is_garbled_test(scan)) return refuse(texts_.say("wrong_layout", {{"typed", scan}, {"meant", test_code()}}));
      return show();
    case State::badge:
      return take_badge(scan);
    case State::password:
      return take_password(typed);
    case State::esd:
      return take_esd(scan);
    case State::ready:
      return take_ready(scan);
    case State::trying:
      return take_trying(scan);
    case State::reel_label:
    case State::reel_place:
    case State::reel_first:
      if (card == Card::abort) {
        say({}, Shape::none, {texts_.say("reel_dropped")}, {});
        return enter(State::ready);
      }
      if (scan.empty() || card) return show();
      if (state_ == State::reel_label) {
        if (!host_.reel_known(scan)) return refuse(texts_.say("reel_unknown", {{"reel", scan}}));
        reel_ = scan;
        return enter(State::reel_place);
      }
      if (state_ == State::reel_place) {
        place_ = scan;
        return enter(State::reel_first);
      }
      return take_reel_first(scan);
    case State::stopped:
      return take_stopped(scan);
    case State::stop_password:
      if (!host_.password_fits(person_, typed)) {
        say(texts_.say("stopped"), Shape::bar, {stop_text_, texts_.say("wrong_password")}, {});
        return enter(State::stopped);
      }
      return enter(State::stop_reason);
    case State::stop_reason:
      return take_stop_reason(scan);
    case State::notes:
      return end_shift(scan);
    case State::dead:
    case State::ended:
      return show();
  }
}

void LineSession::take_badge(const std::string& scan) {
  if (scan.empty() || card_of(scan)) return show();
  if (is_serial(scan)) return refuse(texts_.say("unknown_badge"));
  const auto found = host_.person(scan);
  if (host_.anybody_registered()) {
    if (!found || found->gone) return refuse(texts_.say("unknown_badge"));
    person_ = *found;
    if (person_.role == engineer_role && person_.badge != scan) return enter(State::password);
  } else {
    person_ = {scan, std::string(operator_role), {}, {}, false};
  }
  enter(State::esd);
}

void LineSession::take_password(const std::string& typed) {
  if (host_.password_fits(person_, typed)) return enter(State::esd);
  refuse(texts_.say("wrong_password"));
  enter(State::badge);
}

void LineSession::take_esd(const std::string& scan) {
  const auto card = card_of(scan);
  if (card == Card::yes || scan == "y" || scan == "j") return log_in();
  say({}, Shape::none, {texts_.say("esd_needed")}, {});
  show();
}

ActRecord LineSession::act(const std::string& kind) const {
  ActRecord out;
  out.kind = kind;
  out.at_us = host_.now_us();
  out.station = setup_.station;
  out.who = who_;
  return out;
}

void LineSession::log_in() {
  who_ = person_.name;
  engineer_ = person_.role == engineer_role;
  ActRecord record = act("log-in");
  record.values["role"] = person_.role;
  record.values["wrist strap"] = "checked";
  host_.record(record);
  shift_ = {};
  std::vector<std::string> lines = {texts_.say("hello", {{"name", who_}})};
  const AdoptedNow adopted = host_.adopted(order_);
  if (!adopted.any) lines.push_back(texts_.say("never_adopted"));
  if (!adopted.differing.empty()) {
    lines.push_back(
        texts_.say("not_adopted", {{"what", adopted.differing}, {"number", std::to_string(adopted.number)}}));
    if (person_.role != engineer_role) {
      who_.clear();
      say(texts_.say("refused"), Shape::bar, std::move(lines), texts_.say("call_engineer"));
      return enter(State::badge);
    }
  }
  if (setup_.plan.jig) {
    for (const CalibrationState& c : calibrations_due(setup_.plan.jig->calibrations, host_.now_us())) {
      lines.push_back(texts_.say(c.overdue() ? "overdue" : "warned", {{"what", sentence(c)}}));
      if (!c.overdue()) continue;
      say(texts_.say("stopped"), Shape::bar, std::move(lines), texts_.say("call_engineer"));
      return enter(State::dead);
    }
  }
  if (const std::string stopped = host_.stop_in_force(); !stopped.empty()) return stop(stopped, stop_by_cause);
  say({}, Shape::none, std::move(lines), {});
  enter(State::ready);
}

void LineSession::take_ready(const std::string& scan) {
  if (const auto card = card_of(scan)) {
    if (*card == Card::end) return enter(State::notes);
    if (*card == Card::reel) return enter(State::reel_label);
    if (*card == Card::reseat && !serial_.empty()) return take_serial(serial_);
    if (*card == Card::test) return show();
    for (const CardCode& c : card_codes())
      if (c.card == *card) return refuse(texts_.say("card_now", {{"card", texts_.say(c.key)}}));
  }
  if (scan.empty()) return show();
  if (host_.reel_known(scan)) {
    reel_ = scan;
    say({}, Shape::none, {}, {});
    return enter(State::reel_place);
  }
  if (const auto other = host_.person(scan); other && !other->badge.empty() && other->badge == scan) {
    person_ = *other;
    return enter(State::esd);
  }
  take_serial(scan);
}

void LineSession::take_trying(const std::string& scan) {
  if (card_of(scan) == Card::abort) {
    view_.live = texts_.say("aborting");
    show();
    return host_.abort_trial();
  }
  if (scan.empty()) return;
  view_.lines = {texts_.say("mid_trial", {{"serial", serial_}, {"scan", scan}})};
  show();
}

/// A board scanned where a person is wanted: before people are registered, any other text is taken for a name.
bool LineSession::is_serial(const std::string& scan) const {
  const SerialForm& form = setup_.plan.plan.serial;
  return !form.pattern.empty() && fault_of(form, scan) == SerialFault::none;
}

/// Why these files are none for an operator: they differ from the order's own revision, or from one adopted since the
/// log-in.
std::optional<std::string> LineSession::not_in_force(const std::string& order) {
  const AdoptedNow adopted = host_.adopted(order);
  if (adopted.differing.empty() || engineer_) return std::nullopt;
  return texts_.say("not_adopted", {{"what", adopted.differing}, {"number", std::to_string(adopted.number)}});
}

/// Why the board is not of this line; `order` becomes its order.
std::optional<std::string> LineSession::misplaced(const BoardNow& board, const std::string& scan, std::string& order) {
  const std::string& ours = setup_.plan.plan.board.product;
  if (!board.product.empty() && !ours.empty() && board.product != ours)
    return texts_.say("other_product", {{"serial", scan}, {"product", board.product}, {"ours", ours}});
  order = setup_.order.empty() ? board.order : setup_.order;
  if (!board.order.empty() && board.order != order)
    return texts_.say("other_order", {{"serial", scan}, {"order", board.order}});
  if (order.empty()) return texts_.say("no_order", {{"serial", scan}});
  if (board.order.empty() && host_.order(order).all > 0)
    return texts_.say("unknown_board", {{"serial", scan}, {"order", order}});
  return std::nullopt;
}

std::string LineSession::barred(Bar bar, const BoardNow& b) const {
  switch (bar) {
    case Bar::scrapped:
      return texts_.say("bar_scrapped", {{"serial", b.serial}});
    case Bar::shipped:
      return texts_.say("bar_shipped", {{"serial", b.serial}, {"to", b.shipped_to.empty() ? "" : ": " + b.shipped_to}});
    case Bar::held:
      return texts_.say("bar_held", {{"serial", b.serial}, {"reason", b.holds.empty() ? "-" : b.holds.front().reason}});
    case Bar::already_go:
      return texts_.say("bar_already_go", {{"serial", b.serial}});
    case Bar::needs_review:
      return texts_.say("bar_needs_review", {{"serial", b.serial}});
    default:
      return texts_.say("bar_needs_repair", {{"serial", b.serial}});
  }
}

void LineSession::take_serial(const std::string& scan) {
  switch (fault_of(setup_.plan.plan.serial, scan)) {
    case SerialFault::not_alike:
      return refuse(texts_.say("form_not_alike", {{"scan", scan}}));
    case SerialFault::too_short:
      return refuse(texts_.say("form_short", {{"scan", scan}}));
    case SerialFault::two_together:
      return refuse(texts_.say("form_two", {{"scan", scan}}));
    case SerialFault::check_digit:
      return refuse(texts_.say("form_check", {{"scan", scan}}));
    case SerialFault::none:
      break;
  }
  const BoardNow board = host_.board(scan);
  std::string order;
  if (const auto why = misplaced(board, scan, order)) return refuse(*why);
  if (const auto why = not_in_force(order)) return refuse(*why);
  if (const Bar bar = board.standing.may_try(setup_.plan.plan.line.retests); bar != Bar::none)
    return refuse(barred(bar, board));
  if (state_ == State::dead) return;  // the store failed to answer: what came back is no answer
  serial_ = board.serial;
  order_ = order;
  board_ = board;
  std::vector<std::string> lines;
  if (!board.scanned.empty()) lines.push_back(texts_.say("alias", {{"scan", scan}, {"serial", serial_}}));
  say({}, Shape::none, std::move(lines), {});
  enter(State::trying);
  host_.start_trial(serial_, order);
}

void LineSession::progress(const Progress& progress, const std::string& step) {
  if (state_ != State::trying) return;
  view_.live = texts_.say("step", {{"step", step}, {"left", fmt::format("{:.0f} s", progress.remaining_s)}});
  show();
}

void LineSession::trial_ended(const TrialStart& start, const TrialEnd& end, const std::string& next_action,
                              const Error* record_fault) {
  if (record_fault != nullptr) return record_failed(*record_fault);
  const Judgement judgement = end.outcome.judgement;
  const bool first = !board_ || board_->standing.trials() == 0;
  ++shift_.tried;
  shift_.first += first ? 1 : 0;
  shift_.first_go += first && judgement == Judgement::go ? 1 : 0;
  std::vector<std::string> lines = {start.serial};
  if (const FindingRow* row = decider(end))
    lines.push_back(
        texts_.say("judged_missed", {{"finding", label(row->metric.name)},
                                     {"value", value_text(row->judged.finding, row->metric.unit)},
                                     {"limit", bounds_text(row->limit ? &*row->limit : nullptr, row->metric.unit)}}));
  const bool again = !board_ || board_->standing.trials_since_repair() < setup_.plan.plan.line.retests;
  const std::string then = texts_.say(again ? "retest" : "no_retest");
  if (judgement == Judgement::go) {
    ++shift_.go;
    Standing now = board_ ? board_->standing : Standing();
    now.add({BoardEvent::Kind::tried, {}, Judgement::go, false});
    const bool waits = now.waits_for_review();
    say(texts_.say("word_go"), Shape::disc, std::move(lines), texts_.say(waits ? "go_waits" : "go_action"));
  } else if (judgement == Judgement::no_go) {
    ++shift_.no_go;
    say(texts_.say("word_no_go"), Shape::square, std::move(lines),
        again                 ? then
        : next_action.empty() ? then
                              : next_action);
  } else {
    ++shift_.voids;
    lines.push_back(texts_.say("judged_void", {{"reason", end.outcome.void_reason}}));
    say(texts_.say("word_void"), Shape::triangle, std::move(lines), again ? then : texts_.say("call_engineer"));
  }
  if (!end.safe_state.empty()) view_.lines.push_back(end.safe_state);
  after_trial(end);
}

void LineSession::after_trial(const TrialEnd& end) {
  const std::string cause = cause_of(end);
  same_cause_ = cause.empty() ? 0 : cause == cause_ ? same_cause_ + 1 : 1;
  cause_ = cause;
  if (same_cause_ >= setup_.plan.plan.line.stop_after)
    return stop(texts_.say("stop_cause", {{"n", std::to_string(same_cause_)}, {"cause", cause}}), stop_by_cause);
  const int articles = setup_.plan.plan.line.first_articles;
  if (articles > 0) {
    const auto unapproved = host_.unapproved(order_);
    if (unapproved && *unapproved >= articles)
      return stop(texts_.say("first_article", {{"order", order_}}), stop_by_article);
  }
  enter(State::ready);
}

void LineSession::stop(const std::string& cause, const std::string& kind) {
  stop_text_ = cause;
  stop_kind_ = kind;
  if (host_.stop_in_force().empty() && kind == stop_by_cause) {
    ActRecord record = act("stop");
    record.reason = cause;
    host_.record(record);
  }
  auto lines = view_.lines;
  lines.push_back(cause);
  if (kind == stop_by_cause)
    say(texts_.say("stopped"), Shape::bar, std::move(lines), texts_.say("call_engineer"));
  else
    view_.lines = std::move(lines);
  enter(State::stopped);
}

void LineSession::take_stopped(const std::string& scan) {
  if (scan.empty() || card_of(scan)) return show();
  if (is_serial(scan)) return refuse(texts_.say("not_for_operators"));
  const auto found = host_.person(scan);
  if (!host_.anybody_registered()) {
    person_ = {scan, std::string(engineer_role), {}, {}, false};
    return enter(State::stop_reason);
  }
  if (!found || found->gone || found->role != engineer_role) return refuse(texts_.say("not_for_operators"));
  person_ = *found;
  enter(State::stop_password);
}

void LineSession::take_stop_reason(const std::string& typed) {
  if (typed.empty() || card_of(typed) || is_serial(typed)) return show();
  ActRecord record = act(stop_kind_ == stop_by_article ? "approve" : "go-on");
  record.who = person_.name;
  record.reason = typed;
  if (stop_kind_ == stop_by_article) record.about = order_;
  host_.record(record);
  same_cause_ = 0;
  cause_.clear();
  say({}, Shape::none, {texts_.say("gone_on", {{"name", person_.name}, {"reason", typed}})}, {});
  enter(State::ready);
}

void LineSession::take_reel_first(const std::string& scan) {
  if (fault_of(setup_.plan.plan.serial, scan) != SerialFault::none)
    return refuse(texts_.say("form_not_alike", {{"scan", scan}}));
  FeedChange change;
  change.designator = place_;
  change.reel = reel_;
  change.serial = scan;
  change.station = setup_.station;
  change.who = who_;
  change.at_us = host_.now_us();
  serial_ = scan;
  host_.change_reel(change);
}

void LineSession::reel_changed(const Result<FeedChanged>& changed) {
  if (!changed.ok()) {
    say(texts_.say("refused"), Shape::bar, {changed.error().what}, {});
    return enter(State::ready);
  }
  say({}, Shape::none, {texts_.say("reel_done", {{"reel", reel_}, {"place", place_}, {"serial", serial_}})}, {});
  serial_.clear();  // RESEAT means a board that was tried
  enter(State::ready);
}

void LineSession::record_failed(const Error& error) {
  say(texts_.say("stopped"), Shape::bar, {texts_.say("not_recorded", {{"reason", describe(error)}})},
      texts_.say("call_engineer"));
  enter(State::dead);
}

void LineSession::end_shift(const std::string& notes) {
  const OrderCounts tally = order_.empty() ? OrderCounts{} : host_.order(order_);
  std::string sheet =
      texts_.say("hand_over", {{"station", setup_.station}}) + "\n" + utc_text(host_.now_us()) + "  " + who_ + "\n\n";
  sheet += texts_.say("hand_over_boards", {{"tried", std::to_string(shift_.tried)},
                                           {"go", std::to_string(shift_.go)},
                                           {"no_go", std::to_string(shift_.no_go)},
                                           {"voids", std::to_string(shift_.voids)},
                                           {"refused", std::to_string(shift_.refused)}}) +
           "\n";
  sheet += texts_.say("hand_over_open", {{"waiting", std::to_string(tally.waiting)},
                                         {"held", std::to_string(tally.held)},
                                         {"voids", std::to_string(tally.voids)}}) +
           "\n";
  if (!order_.empty())
    sheet += texts_.say("hand_over_order",
                        {{"order", order_},
                         {"all", std::to_string(tally.all)},
                         {"tried", std::to_string(tally.tried)},
                         {"go", std::to_string(tally.go)},
                         {"missing", std::to_string(std::max<std::int64_t>(0, tally.all - tally.tried))}}) +
             "\n";
  if (!notes.empty()) sheet += texts_.say("hand_over_next", {{"notes", notes}}) + "\n";
  const std::string file = host_.hand_over(sheet);
  ActRecord record = act("log-out");
  record.reason = notes;
  record.about = order_;
  record.values = {{"tried", std::to_string(shift_.tried)},
                   {"go", std::to_string(shift_.go)},
                   {"no-go", std::to_string(shift_.no_go)},
                   {"void", std::to_string(shift_.voids)}};
  host_.record(record);
  say({}, Shape::none, {texts_.say("goodbye", {{"name", who_}, {"file", file}})}, {});
  who_.clear();
  enter(State::ended);
  host_.quit();
}

}  // namespace jigwright
