#include "station/watch.hpp"

#include <fmt/format.h>

#include <chrono>
#include <cmath>
#include <nlohmann/json.hpp>

#include "station/words.hpp"

namespace jigwright {

namespace {

void count(Tally& tally, const TrialEnd& end, bool recorded) {
  if (end.outcome.judgement == Judgement::go) ++tally.go;
  if (end.outcome.judgement == Judgement::no_go) ++tally.no_go;
  if (end.outcome.judgement == Judgement::void_) ++tally.voids;
  if (!recorded) ++tally.not_recorded;
}

/// The finding with the least room, among the limited ones.
const FindingRow* tightest(const TrialEnd& end) {
  const FindingRow* least = nullptr;
  for (const FindingRow& row : end.findings) {
    if (!row.limit || std::isnan(row.judged.margin) || row.metric.about != About::board) continue;
    if (least == nullptr || row.judged.margin < least->judged.margin) least = &row;
  }
  return least;
}

int missed(const TrialEnd& end) {
  int n = 0;
  for (const FindingRow& row : end.findings) n += row.judged.verdict == Verdict::missed ? 1 : 0;
  return n;
}

const FindingRow* decider(const TrialEnd& end) {
  const int at = end.outcome.deciding;
  return at >= 0 && at < static_cast<int>(end.findings.size()) ? &end.findings[static_cast<std::size_t>(at)] : nullptr;
}

std::string finding_text(const FindingRow& row) {
  return fmt::format("{} = {}, limit {}", label(row.metric.name), value_text(row.judged.finding, row.metric.unit),
                     bounds_text(row.limit ? &*row.limit : nullptr, row.metric.unit));
}

class TextWatcher final : public Watcher {
 public:
  TextWatcher(std::FILE* out, Detail detail, bool terminal) : out_(out), detail_(detail), terminal_(terminal) {}

  void trial_started(int nest, const TrialStart& start) override {
    if (detail_ != Detail::findings) return;
    wipe();
    fmt::print(out_, "{} in nest {}, plan {}, limits {} revision {}\n", printable(start.serial), nest, start.plan,
               start.limit_set, start.limit_revision);
  }

  void setting_started(const Progress& progress, const std::string& step, const Setting& setting) override {
    if (!terminal_ || !due()) return;
    live_ = fmt::format("{:>3}/{} {}: {}  {:.1f} s, about {:.1f} s left", progress.setting + 1, progress.settings, step,
                        setting.shown, progress.elapsed_s, progress.remaining_s);
    show();
  }

  void reading(const Progress&, const Setting&, const Reading&) override {}

  void finding(int, const Metric& metric, const Limit* limit, const Judged& judged) override {
    if (detail_ != Detail::findings) {
      if (terminal_)
        last_ = fmt::format("   last: {} = {}{}", label(metric.name), value_text(judged.finding, metric.unit),
                            limit == nullptr ? "" : fmt::format(" ({})", bounds_text(limit, metric.unit)));
      return;
    }
    wipe();
    const bool bad =
        judged.verdict == Verdict::missed || judged.verdict == Verdict::unsure || judged.verdict == Verdict::invalid;
    fmt::print(out_, "{} {:<52} {:>12}   {:<28} {}\n", bad ? '!' : ' ', label(metric.name),
               value_text(judged.finding, metric.unit), bounds_text(limit, metric.unit), word(judged.verdict));
  }

  void trial_ended(int, const TrialStart& start, const TrialEnd& end, const std::string& next_action,
                   const Error* fault) override {
    count(tally_, end, fault == nullptr);
    wipe();
    if (detail_ == Detail::nothing) return;
    const std::string_view judgement = word(end.outcome.judgement);
    const double took_s = static_cast<double>(end.took_ms) / 1e3;
    if (detail_ == Detail::findings) fmt::print(out_, "\n");
    if (end.outcome.judgement == Judgement::go) {
      const FindingRow* least = tightest(end);
      fmt::print(out_, "{}  {:<6} {:>6.1f} s   {}\n", printable(start.serial), judgement, took_s,
                 least == nullptr
                     ? ""
                     : fmt::format("least room {:.0f} %: {}", 100 * least->judged.margin, label(least->metric.name)));
      return;
    }
    const FindingRow* row = decider(end);
    std::string why =
        end.outcome.judgement == Judgement::no_go && row != nullptr ? finding_text(*row) : end.outcome.void_reason;
    if (const int n = missed(end); n > 1 && end.outcome.judgement == Judgement::no_go)
      why += fmt::format(" (and {} more)", n - 1);
    fmt::print(out_, "{}  {:<6} {:>6.1f} s   {}\n", printable(start.serial), judgement, took_s, printable(why));
    if (fault != nullptr) fmt::print(out_, "          NOT RECORDED: {}\n", describe(*fault));
    if (!end.safe_state.empty())
      fmt::print(out_, "          NOT CONFIRMED SAFE, keep the lid closed: {}\n", printable(end.safe_state));
    if (!next_action.empty()) fmt::print(out_, "          next: {}\n", printable(next_action));
  }

  void notice(int, const std::string& text) override {
    wipe();
    fmt::print(out_, "{}\n", printable(text));
  }

  void run_ended(double wall_s) override {
    wipe();
    if (detail_ == Detail::findings) return;
    fmt::print(out_, "{} board{}: {} GO, {} NO-GO, {} VOID, in {:.1f} s\n", tally_.trials(),
               tally_.trials() == 1 ? "" : "s", tally_.go, tally_.no_go, tally_.voids, wall_s);
    if (tally_.not_recorded > 0) fmt::print(out_, "{} of them NOT RECORDED\n", tally_.not_recorded);
  }

  const Tally& tally() const override { return tally_; }

 private:
  /// At most 20 live lines a second, by the computer's own clock.
  bool due() {
    const auto now = std::chrono::steady_clock::now();
    if (now - shown_at_ < std::chrono::milliseconds(50)) return false;
    shown_at_ = now;
    return true;
  }
  void show() {
    std::string line = live_ + last_;
    if (line.size() > 118) line.resize(118);
    fmt::print(out_, "\r{:<{}}", line, widest_);
    widest_ = std::max(widest_, line.size());
    std::fflush(out_);
  }
  void wipe() {
    if (widest_ == 0) return;
    fmt::print(out_, "\r{:<{}}\r", "", widest_);
    widest_ = 0;
  }

  std::FILE* out_;
  Detail detail_;
  bool terminal_;
  Tally tally_;
  std::string live_, last_;
  std::size_t widest_{0};
  std::chrono::steady_clock::time_point shown_at_{};
};

using Json = nlohmann::ordered_json;

Json number(double v) {
  return std::isfinite(v) ? Json(v) : Json(nullptr);
}
Json bound(const std::optional<double>& v) {
  return v ? number(*v) : Json(nullptr);
}

Json finding_json(const Metric& metric, const Limit* limit, const Judged& judged) {
  Json out{{"step", metric.name.step},
           {"metric", metric.name.name},
           {"variant", metric.name.variant},
           {"unit", symbol(metric.unit)},
           {"value", number(judged.finding.value)},
           {"u", number(judged.finding.u)},
           {"n", judged.finding.n},
           {"state", state_word(judged.finding.state)},
           {"low", limit == nullptr ? Json(nullptr) : bound(limit->applied.low)},
           {"high", limit == nullptr ? Json(nullptr) : bound(limit->applied.high)},
           {"verdict", word(judged.verdict)},
           {"margin", number(judged.margin)}};
  return out;
}

class JsonWatcher final : public Watcher {
 public:
  explicit JsonWatcher(std::FILE* out) : out_(out) {}

  void trial_started(int nest, const TrialStart& start) override {
    print({{"event", "trial_started"},
           {"nest", nest},
           {"serial", start.serial},
           {"order", start.order},
           {"plan", start.plan},
           {"limit_set", start.limit_set},
           {"limit_revision", start.limit_revision},
           {"at_us", start.at_us}});
  }
  void setting_started(const Progress& p, const std::string& step, const Setting& setting) override {
    print({{"event", "setting"},
           {"nest", p.nest},
           {"step", step},
           {"setting", setting.id},
           {"number", p.setting + 1},
           {"of", p.settings},
           {"elapsed_s", p.elapsed_s},
           {"remaining_s", p.remaining_s}});
  }
  void reading(const Progress&, const Setting&, const Reading&) override {}
  void finding(int nest, const Metric& metric, const Limit* limit, const Judged& judged) override {
    Json out{{"event", "finding"}, {"nest", nest}};
    out.update(finding_json(metric, limit, judged));
    print(out);
  }
  void trial_ended(int nest, const TrialStart& start, const TrialEnd& end, const std::string& next_action,
                   const Error* fault) override {
    count(tally_, end, fault == nullptr);
    Json out{{"event", "trial_ended"},
             {"nest", nest},
             {"serial", start.serial},
             {"judgement", word(end.outcome.judgement)},
             {"recorded", fault == nullptr},
             {"took_s", static_cast<double>(end.took_ms) / 1e3},
             {"void_reason", end.outcome.void_reason}};
    const FindingRow* row = decider(end);
    out["deciding"] =
        row == nullptr ? Json(nullptr) : finding_json(row->metric, row->limit ? &*row->limit : nullptr, row->judged);
    out["missed"] = missed(end);
    out["safe_state_unconfirmed"] = end.safe_state;
    out["next_action"] = next_action;
    print(out);
  }
  void notice(int nest, const std::string& text) override {
    print({{"event", "notice"}, {"nest", nest}, {"text", text}});
  }
  void run_ended(double wall_s) override {
    print({{"event", "run_ended"},
           {"trials", tally_.trials()},
           {"go", tally_.go},
           {"no_go", tally_.no_go},
           {"void", tally_.voids},
           {"not_recorded", tally_.not_recorded},
           {"wall_s", wall_s}});
  }
  const Tally& tally() const override { return tally_; }

 private:
  void print(const Json& event) {
    // Serials and texts come from outside: bytes that are no UTF-8 are replaced, not thrown about.
    fmt::print(out_, "{}\n", event.dump(-1, ' ', false, Json::error_handler_t::replace));
    std::fflush(out_);
  }
  std::FILE* out_;
  Tally tally_;
};

}  // namespace

std::unique_ptr<Watcher> make_text_watcher(std::FILE* out, Detail detail, bool terminal) {
  return std::make_unique<TextWatcher>(out, detail, terminal);
}
std::unique_ptr<Watcher> make_json_watcher(std::FILE* out) {
  return std::make_unique<JsonWatcher>(out);
}

}  // namespace jigwright
