#include "db/standing.hpp"

#include <algorithm>

namespace jigwright {

std::string_view word(BoardState state) {
  switch (state) {
    case BoardState::fresh:
      return "new";
    case BoardState::tried:
      return "tried";
    case BoardState::held:
      return "held";
    case BoardState::repaired:
      return "repaired";
    case BoardState::released:
      return "released";
    case BoardState::shipped:
      return "shipped";
    case BoardState::scrapped:
      return "scrapped";
  }
  return "";
}

void Standing::add(const BoardEvent& event) {
  using Kind = BoardEvent::Kind;
  switch (event.kind) {
    case Kind::tried:
      trials_.push_back({event.judgement, false});
      ids_.push_back(event.id);
      withdrawn_.push_back(event.withdrawn);
      if (!event.withdrawn) ++since_repair_;
      repaired_ = released_ = false;
      return;
    case Kind::reviewed:
      for (std::size_t i = 0; i < ids_.size(); ++i)
        if (ids_[i] == event.id) trials_[i].reviewed = true;
      return;
    case Kind::held:
      holds_.insert(event.id);
      return;
    case Kind::lifted:
      released_ = holds_.erase(event.id) > 0 || released_;
      return;
    case Kind::repaired:
      repaired_ = true;
      since_repair_ = 0;
      return;
    case Kind::allowed:
      since_repair_ = 0;
      return;
    case Kind::scrapped:
      scrapped_ = true;
      return;
    case Kind::shipped:
      shipped_ = true;
      return;
    case Kind::returned:
      shipped_ = false;
      return;
  }
}

std::optional<std::size_t> Standing::speaking() const {
  return speaking_trial(trials_);
}

BoardState Standing::state() const {
  if (scrapped_) return BoardState::scrapped;
  if (shipped_) return BoardState::shipped;
  if (!holds_.empty()) return BoardState::held;
  if (repaired_) return BoardState::repaired;
  if (released_) return BoardState::released;
  return trials_.empty() ? BoardState::fresh : BoardState::tried;
}

std::optional<Judgement> Standing::judgement() const {
  const auto at = speaking();
  return at ? std::optional(trials_[*at].judgement) : std::nullopt;
}

bool Standing::speaking_withdrawn() const {
  const auto at = speaking();
  return at && withdrawn_[*at];
}

bool Standing::waits_for_review() const {
  return !trials_.empty() && trials_.back().judgement == Judgement::go && speaking() != trials_.size() - 1;
}

std::string Standing::to_review() const {
  if (!waits_for_review()) return {};
  for (std::size_t i = trials_.size(); i-- > 0;)
    if (trials_[i].judgement == Judgement::no_go && !trials_[i].reviewed) return ids_[i];
  return {};
}

bool Standing::ever_missed() const {
  return std::any_of(trials_.begin(), trials_.end(),
                     [](const PastTrial& t) { return t.judgement == Judgement::no_go; });
}

Bar Standing::may_try(int retests) const {
  if (scrapped_) return Bar::scrapped;
  if (shipped_) return Bar::shipped;
  if (!holds_.empty()) return Bar::held;
  const bool judged_since = !trials_.empty() && !repaired_ && !withdrawn_.back();
  if (judged_since && judgement() == Judgement::go && !speaking_withdrawn()) return Bar::already_go;
  if (judged_since && waits_for_review()) return Bar::needs_review;
  return since_repair_ > retests ? Bar::needs_repair : Bar::none;
}

Bar Standing::may_ship() const {
  if (scrapped_) return Bar::scrapped;
  if (shipped_) return Bar::shipped;
  if (!holds_.empty()) return Bar::held;
  if (trials_.empty()) return Bar::not_tried;
  if (repaired_) return Bar::untried_since_repair;
  if (waits_for_review()) return Bar::needs_review;
  if (judgement() != Judgement::go) return Bar::not_go;
  return speaking_withdrawn() ? Bar::withdrawn : Bar::none;
}

}  // namespace jigwright
