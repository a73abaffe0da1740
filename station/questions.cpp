#include "station/questions.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <nlohmann/json.hpp>

#include "db/week.hpp"
#include "station/tables.hpp"
#include "station/words.hpp"

namespace jigwright {
namespace {

using Json = nlohmann::ordered_json;

/// Texts that are not UTF-8 (a scanner may send anything) are shown with replacement characters.
std::string dump(const Json& json) {
  return json.dump(2, ' ', false, Json::error_handler_t::replace) + "\n";
}

template <class T>
Json maybe(const std::optional<T>& value) {
  return value ? Json(*value) : Json(nullptr);
}
Json number(double value) {
  return std::isfinite(value) ? Json(value) : Json(nullptr);
}
Json unless_empty(const std::string& text) {
  return text.empty() ? Json(nullptr) : Json(text);
}

std::string how(bool certain) {
  return certain ? "certain" : "possible";
}
std::string yes_no(std::optional<bool> value) {
  return !value ? "" : *value ? "yes" : "no";
}
std::string word_of(Origin origin) {
  return origin == Origin::measured ? "measured" : origin == Origin::simulated ? "simulated" : "taken";
}

std::string judged(const BoardPlace& board) {
  return board.judgement ? std::string(word(*board.judgement)) : "not tried";
}
std::string when(const BoardPlace& board) {
  return board.at_us ? utc_text(*board.at_us) : "";
}
std::string build_no(const BoardPlace& board) {
  return csv_count(board.build_no);
}
std::string count(std::int64_t n, const char* one, const char* many) {
  return fmt::format("{} {}", n, n == 1 ? one : many);
}
std::string join(const Cells& words, const char* between) {
  std::string out;
  for (const std::string& w : words) out += (out.empty() ? "" : between) + w;
  return out;
}

/// "TB3-0200 (build number 200 of WO-1041, three-range bridge amplifier)"
std::string introduced(const BoardPlace& board) {
  std::string inside;
  if (board.build_no) inside = fmt::format("build number {} of {}", *board.build_no, board.order);
  if (!board.product.empty()) inside += ", " + board.product;
  return board.serial + (inside.empty() ? " (in no known order)" : " (" + inside + ")");
}

/// "NO-GO, tried 2026-01-09T12:00:00Z, 2 trials"
std::string standing(const BoardPlace& board) {
  if (!board.judgement) return "not tried yet";
  return fmt::format("{}, tried {}, {}", judged(board), when(board), count(board.trials, "trial", "trials"));
}

Json json_of(const BoardPlace& board) {
  Json out;
  out["serial"] = board.serial;
  out["order"] = unless_empty(board.order);
  out["build_no"] = maybe(board.build_no);
  out["panel"] = unless_empty(board.panel);
  out["product"] = unless_empty(board.product);
  out["judgement"] = board.judgement ? Json(word(*board.judgement)) : Json(nullptr);
  out["at"] = board.at_us ? Json(utc_text(*board.at_us)) : Json(nullptr);
  out["trials"] = board.trials;
  return out;
}

Json json_of(const ReelFacts& reel) {
  Json out;
  out["reel"] = reel.reel;
  out["maker"] = reel.maker;
  out["part"] = reel.part;
  out["lot"] = reel.lot;
  out["date_code"] = unless_empty(reel.date_code);
  out["distributor"] = unless_empty(reel.distributor);
  out["rereeled"] = maybe(reel.rereeled);
  out["quantity"] = maybe(reel.quantity);
  out["marking"] = unless_empty(reel.marking);
  return out;
}

// ---- trace by serial

std::string table_of(const SerialTrace& trace) {
  std::string out = printable(introduced(trace.board)) + ": " + standing(trace.board) + ".\n";
  if (trace.reels.empty()) return out + "No reel on record feeds it.\n";
  out += "It carries:\n";
  TextTable table({"place", "reel", "maker", "part", "lot", "date code", "distributor", "re-reeled", "marking", "how"},
                  std::vector<bool>(10, false));
  for (const Carried& c : trace.reels)
    table.add({c.designator, c.reel.reel, c.reel.maker, c.reel.part, c.reel.lot, c.reel.date_code, c.reel.distributor,
               yes_no(c.reel.rereeled), c.reel.marking, how(c.certain)});
  return out + table.text();
}

std::string csv_of(const SerialTrace& trace) {
  std::string out = csv_line({"serial", "designator", "reel", "maker", "part", "lot", "date_code", "distributor",
                              "rereeled", "quantity", "marking", "how"});
  for (const Carried& c : trace.reels)
    out += csv_line({trace.board.serial, c.designator, c.reel.reel, c.reel.maker, c.reel.part, c.reel.lot,
                     c.reel.date_code, c.reel.distributor, yes_no(c.reel.rereeled), csv_count(c.reel.quantity),
                     c.reel.marking, how(c.certain)});
  return out;
}

std::string json_text(const SerialTrace& trace) {
  Json out = json_of(trace.board);
  out["reels"] = Json::array();
  for (const Carried& c : trace.reels) {
    Json one;
    one["designator"] = c.designator;
    one["how"] = how(c.certain);
    one.update(json_of(c.reel));
    out["reels"].push_back(one);
  }
  return dump(out);
}

// ---- trace by reel

void add_unlike(Cells& words, const std::string& word) {
  if (std::find(words.begin(), words.end(), word) == words.end()) words.push_back(word);
}

std::string sentence(const ReelTrace& trace) {
  const ReelFacts& r = trace.reel;
  std::string out = fmt::format("Reel {} ({} {}, lot {}, date code {})", r.reel, r.maker, r.part, r.lot,
                                r.date_code.empty() ? "unknown" : r.date_code);
  if (trace.boards.empty()) return out + " is on no board on record.\n";
  Cells places, orders;
  std::int64_t possibly = 0;
  for (const Carrier& c : trace.boards) {
    for (const std::string& d : c.designators) add_unlike(places, d);
    add_unlike(orders, c.board.order);
    possibly += c.certain ? 0 : 1;
  }
  const auto boards = static_cast<std::int64_t>(trace.boards.size());
  out += fmt::format(" feeds {} on {} of {}", join(places, " and "), count(boards, "board", "boards"),
                     join(orders, " and "));
  if (possibly > 0) out += fmt::format(", {} of them only possibly", possibly);
  return out + ":\n";
}

std::string judgement_counts(const ReelTrace& trace) {
  auto number_of = [&](std::optional<Judgement> j) {
    return std::count_if(trace.boards.begin(), trace.boards.end(),
                         [&](const Carrier& c) { return c.board.judgement == j; });
  };
  return fmt::format("{} GO, {} NO-GO, {} VOID, {} not tried.\n", number_of(Judgement::go), number_of(Judgement::no_go),
                     number_of(Judgement::void_), number_of(std::nullopt));
}

std::string table_of(const ReelTrace& trace) {
  std::string out = printable(sentence(trace).substr(0, sentence(trace).size() - 1)) + "\n";
  if (trace.boards.empty()) return out;
  TextTable table({"serial", "order", "build no", "place", "how", "judgement", "tried"},
                  {false, false, true, false, false, false, false});
  for (const Carrier& c : trace.boards)
    table.add({c.board.serial, c.board.order, build_no(c.board), join(c.designators, " "), how(c.certain),
               judged(c.board), when(c.board)});
  return out + table.text() + judgement_counts(trace);
}

std::string csv_of(const ReelTrace& trace) {
  std::string out =
      csv_line({"reel", "serial", "order", "build_no", "panel", "designators", "how", "judgement", "at", "trials"});
  for (const Carrier& c : trace.boards)
    out += csv_line({trace.reel.reel, c.board.serial, c.board.order, build_no(c.board), c.board.panel,
                     join(c.designators, " "), how(c.certain), c.board.judgement ? judged(c.board) : "", when(c.board),
                     std::to_string(c.board.trials)});
  return out;
}

std::string json_text(const ReelTrace& trace) {
  Json out = json_of(trace.reel);
  out["boards"] = Json::array();
  for (const Carrier& c : trace.boards) {
    Json one = json_of(c.board);
    one["designators"] = c.designators;
    one["how"] = how(c.certain);
    out["boards"].push_back(one);
  }
  return dump(out);
}

// ---- show

std::string reason(const ShownTrial& t) {
  if (t.judgement == Judgement::void_) return t.void_reason;
  return t.deciding && t.judgement == Judgement::no_go ? *t.deciding : "";
}

std::string took(const ShownTrial& t) {
  return t.took_ms ? fmt::format("{:.2f} s", static_cast<double>(*t.took_ms) / 1000) : "";
}

std::string trials_table(const BoardShown& shown) {
  TextTable table({"trial", "tried", "judgement", "took", "for"}, {true, false, false, true, false});
  for (const ShownTrial& t : shown.trials)
    table.add({std::to_string(t.attempt) + (t.counts ? "*" : " "), utc_text(t.at_us), std::string(word(t.judgement)),
               took(t), reason(t)});
  return table.text() + "  (* speaks for the board)\n";
}

/// "Trial 1: plan p, limits l rev 3, full; by A. Tester at bench 1, nest 1."
std::string circumstances(const ShownTrial& t) {
  const std::string adopted = !t.adopted        ? ""
                              : *t.adopted == 0 ? ", NOT ADOPTED"
                                                : fmt::format(", adopted as {}", *t.adopted);
  return printable(fmt::format("Trial {}: plan {}, limits {} rev {}, {}{}; by {} at {}, nest {}.", t.attempt, t.plan,
                               t.limit_set, t.limit_revision, t.depth, adopted,
                               t.operator_name.empty() ? "nobody logged in" : t.operator_name, t.station, t.nest)) +
         "\n" +
         (t.unsafe.empty() ? "" : fmt::format("Trial {} left unconfirmed: {}.\n", t.attempt, printable(t.unsafe)));
}

std::string findings_table(const ShownTrial& t) {
  TextTable table({"margin", "finding", "value", "U (k=2)", "limits", "readings", "verdict"},
                  {true, false, true, true, false, true, false});
  for (const ShownFinding& f : t.findings)
    table.add({margin_text(f.judged.margin), label(f.metric.name), value_text(f.judged.finding, f.metric.unit),
               uncertainty_text(f.judged.finding, f.metric.unit),
               bounds_text(f.limit ? &*f.limit : nullptr, f.metric.unit), std::to_string(f.judged.finding.n),
               std::string(word(f.judged.verdict))});
  return table.text();
}

const ShownTrial* latest_ended(const BoardShown& shown) {
  for (auto t = shown.trials.rbegin(); t != shown.trials.rend(); ++t)
    if (!t->open && !t->findings.empty()) return &*t;
  return nullptr;
}

std::string table_of(const BoardShown& shown) {
  std::string out = printable(introduced(shown.board)) + ": " + standing(shown.board) + ".\n";
  if (shown.trials.empty()) return out;
  out += trials_table(shown);
  for (const ShownTrial& t : shown.trials) out += circumstances(t);
  const ShownTrial* latest = latest_ended(shown);
  if (latest == nullptr) return out + "No trial has findings.\n";
  out +=
      fmt::format("Findings of trial {}, least margin first (margin: share left of the room from nominal to limit):\n",
                  latest->attempt);
  return out + findings_table(*latest);
}

Cells trial_cells(const BoardShown& shown, const ShownTrial& t) {
  return {shown.board.serial,
          std::to_string(t.attempt),
          utc_text(t.at_us),
          std::string(word(t.judgement)),
          t.void_reason,
          t.counts ? "yes" : "no",
          word_of(t.origin),
          t.plan,
          t.limit_set,
          std::to_string(t.limit_revision),
          t.depth,
          csv_count(t.took_ms),
          t.operator_name,
          t.station,
          std::to_string(t.nest)};
}

Cells finding_cells(const ShownFinding& f) {
  const Finding& found = f.judged.finding;
  const Bounds applied = f.limit ? f.limit->applied : Bounds{};
  const Bounds specified = f.limit ? f.limit->specification : Bounds{};
  return {f.metric.name.step,
          f.metric.name.name,
          f.metric.name.variant,
          std::string(symbol(f.metric.unit)),
          csv_number(found.value),
          csv_number(found.u),
          std::to_string(found.n),
          std::string(state_word(found.state)),
          std::string(word(f.judged.verdict)),
          csv_number(f.judged.margin),
          csv_number(applied.low),
          csv_number(applied.high),
          csv_number(specified.low),
          csv_number(specified.high)};
}

std::string csv_of(const BoardShown& shown) {
  std::string out =
      csv_line({"serial",    "trial",    "at",    "judgement", "void_reason", "counts",  "origin", "plan",
                "limit_set", "revision", "depth", "took_ms",   "operator",    "station", "nest",   "step",
                "metric",    "variant",  "unit",  "value",     "u",           "n",       "state",  "verdict",
                "margin",    "low",      "high",  "spec_low",  "spec_high"});
  for (const ShownTrial& t : shown.trials) {
    std::vector<Cells> rows;
    for (const ShownFinding& f : t.findings) rows.push_back(finding_cells(f));
    if (rows.empty()) rows.emplace_back(14);
    for (const Cells& row : rows) {
      Cells line = trial_cells(shown, t);
      line.insert(line.end(), row.begin(), row.end());
      out += csv_line(line);
    }
  }
  return out;
}

Json json_of(const ShownFinding& f) {
  const Finding& found = f.judged.finding;
  Json out;
  out["step"] = f.metric.name.step;
  out["metric"] = f.metric.name.name;
  out["variant"] = unless_empty(f.metric.name.variant);
  out["unit"] = symbol(f.metric.unit);
  out["value"] = number(found.value);
  out["u"] = number(found.u);
  out["n"] = found.n;
  out["state"] = state_word(found.state);
  out["verdict"] = word(f.judged.verdict);
  out["margin"] = number(f.judged.margin);
  if (!f.limit) return out;
  out["low"] = maybe(f.limit->applied.low);
  out["high"] = maybe(f.limit->applied.high);
  out["spec_low"] = maybe(f.limit->specification.low);
  out["spec_high"] = maybe(f.limit->specification.high);
  out["nominal"] = number(f.limit->nominal);
  return out;
}

Json json_of(const ShownTrial& t) {
  Json out;
  out["uuid"] = text(t.uuid);
  out["trial"] = t.attempt;
  out["at"] = utc_text(t.at_us);
  out["ended"] = !t.open;
  out["judgement"] = word(t.judgement);
  out["void_reason"] = unless_empty(t.void_reason);
  out["deciding"] = maybe(t.deciding);
  out["counts"] = t.counts;
  out["origin"] = word_of(t.origin);
  out["plan"] = t.plan;
  out["limit_set"] = t.limit_set;
  out["revision"] = t.limit_revision;
  out["adopted"] = t.adopted ? Json(*t.adopted) : Json(nullptr);
  out["depth"] = t.depth;
  out["took_ms"] = maybe(t.took_ms);
  out["operator"] = unless_empty(t.operator_name);
  out["station"] = t.station;
  out["nest"] = t.nest;
  out["program"] = t.program;
  out["ambient_degC"] = maybe(t.ambient_C);
  out["safe_state_unconfirmed"] = unless_empty(t.unsafe);
  out["findings"] = Json::array();
  for (const ShownFinding& f : t.findings) out["findings"].push_back(json_of(f));
  return out;
}

std::string json_text(const BoardShown& shown) {
  Json out = json_of(shown.board);
  out["trials"] = Json::array();
  for (const ShownTrial& t : shown.trials) out["trials"].push_back(json_of(t));
  return dump(out);
}

template <class Answer>
std::string in_form(const Answer& answer, Form form) {
  if (form == Form::csv) return csv_of(answer);
  return form == Form::json ? json_text(answer) : table_of(answer);
}

}  // namespace

std::string render(const SerialTrace& trace, Form form) {
  return in_form(trace, form);
}
std::string render(const ReelTrace& trace, Form form) {
  return in_form(trace, form);
}
std::string render(const BoardShown& shown, Form form) {
  return in_form(shown, form);
}

std::string render(const std::vector<EnteredFile>& entered) {
  std::string out;
  std::int64_t added = 0;
  for (const EnteredFile& f : entered) {
    added += f.added;
    const std::int64_t rows = f.added + f.unchanged;
    const std::string kind = rows == 1 ? f.kind.substr(0, f.kind.size() - 1) : f.kind;
    const std::string share = f.unchanged == 0 ? "all new"
                              : f.added == 0   ? "all in the store already"
                                               : fmt::format("{} new, {} in the store already", f.added, f.unchanged);
    out += fmt::format("{}: {} {}, {}\n", printable(f.name), rows, kind, rows == 0 ? "none" : share);
  }
  return added == 0 ? out + "Nothing was changed.\n" : out;
}

}  // namespace jigwright
