#include "station/audit_text.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <nlohmann/json.hpp>

#include "db/digest.hpp"
#include "db/week.hpp"

namespace jigwright {
namespace {

using Json = nlohmann::ordered_json;

/// Texts that are not UTF-8 are shown with replacement characters.
std::string dump(const Json& json) {
  return json.dump(2, ' ', false, Json::error_handler_t::replace) + "\n";
}
Json unless_empty(const std::string& text) {
  return text.empty() ? Json(nullptr) : Json(text);
}

std::string count(std::int64_t n, const char* one) {
  return fmt::format("{} {}{}", n, one, n == 1 ? "" : "s");
}

std::string differences_text(const AuditReport& report) {
  std::string out;
  const auto record = std::find_if(report.differences.begin(), report.differences.end(),
                                   [](const Difference& d) { return !d.record.empty(); });
  if (record != report.differences.end())
    out += "The first record that differs:\n  " + printable(sentence(*record)) + "\n";
  out += "All that was found:\n";
  for (const Difference& d : report.differences) out += "  " + printable(sentence(d)) + "\n";
  const auto more = report.found - static_cast<std::int64_t>(report.differences.size());
  if (more > 0) out += fmt::format("  and {} more\n", more);
  return out + fmt::format("Now {}; and find out who or what changed it.\n", restore_advice);
}

std::string heads_text(const AuditReport& report) {
  if (report.heads.empty()) return "It holds no record yet.\n";
  std::string out = report.whole()
                        ? "Note this elsewhere: a chain that is cut off later, rows and all, shows only beside "
                          "it.\n"
                        : "Its chains end so; compare with what was noted elsewhere:\n";
  for (const ChainHead& h : report.heads)
    out +=
        printable(fmt::format("  station {}, epoch {}, record {}, {}:", h.station, h.epoch, h.seq, utc_text(h.at_us))) +
        "\n    " + hex(h.hash) + "\n";
  return out;
}

std::string page(const AuditReport& report, const std::string& store) {
  std::string out = printable(store);
  out += report.whole() ? ": whole. Every record is as it was made.\n"
                        : fmt::format(": NOT as recorded: {}.\n", count(report.found, "difference"));
  out += fmt::format("Checked: {} ({}, {}, {}), {}, the file, its schema.\n", count(report.records, "record"),
                     count(report.trials, "trial"), count(report.lists, "list"), count(report.acts, "act"),
                     count(report.findings, "finding"));
  if (report.open > 0)
    out +=
        count(report.open, "trial") +
        (report.open == 1 ? " has no record yet: it is under way, or was cut short and is recorded at the next start.\n"
                          : " have no record yet: under way, or cut short and recorded at the next start.\n");
  if (report.archived > 0)
    out +=
        fmt::format("The raw readings of {} are archived away; their hashes stand.\n", count(report.archived, "trial"));
  if (report.steps_back > 0)
    out += fmt::format("{} record{} a stamp before the one before: a clock was set back. Their order is the chain's.\n",
                       report.steps_back, report.steps_back == 1 ? " bears" : "s bear");
  if (!report.whole()) out += differences_text(report);
  return out + heads_text(report);
}

Json json_of(const Difference& d) {
  Json out;
  out["what"] = d.what;
  out["record"] = unless_empty(d.record);
  out["on"] = unless_empty(d.on);
  out["station"] = unless_empty(d.station);
  out["epoch"] = d.record.empty() ? Json(nullptr) : Json(d.epoch);
  out["seq"] = d.record.empty() ? Json(nullptr) : Json(d.seq);
  return out;
}

Json json_of(const ChainHead& h) {
  Json out;
  out["station"] = h.station;
  out["epoch"] = h.epoch;
  out["seq"] = h.seq;
  out["at"] = utc_text(h.at_us);
  out["hash"] = hex(h.hash);
  return out;
}

Json json_of(const LogLine& line) {
  Json out;
  out["at"] = utc_text(line.at_us);
  out["who"] = unless_empty(line.who);
  out["what"] = line.what;
  out["on"] = unless_empty(line.on);
  out["station"] = line.station;
  out["epoch"] = line.epoch;
  out["seq"] = line.seq;
  return out;
}

template <class T>
Json list_of(const std::vector<T>& items) {
  Json out = Json::array();
  for (const T& item : items) out.push_back(json_of(item));
  return out;
}

}  // namespace

std::string render(const AuditReport& report, const std::string& store, bool json) {
  if (!json) return page(report, store);
  Json out;
  out["store"] = store;
  out["whole"] = report.whole();
  out["records"] = report.records;
  out["trials"] = report.trials;
  out["lists"] = report.lists;
  out["acts"] = report.acts;
  out["findings"] = report.findings;
  out["open_trials"] = report.open;
  out["archived_readings"] = report.archived;
  out["clock_steps_back"] = report.steps_back;
  out["found"] = report.found;
  out["differences"] = list_of(report.differences);
  out["heads"] = list_of(report.heads);
  return dump(out);
}

std::string render(const std::vector<LogLine>& log, bool json) {
  if (json) return dump(list_of(log));
  if (log.empty()) return "Nothing is on record.\n";
  std::size_t who = 0, what = 0, on = 0;
  for (const LogLine& l : log) {
    who = std::max(who, printable(l.who).size());
    what = std::max(what, l.what.size());
    on = std::max(on, printable(l.on).size());
  }
  std::string out;
  for (const LogLine& l : log)
    out += fmt::format("{}  {:{}}  {:{}}  {:{}}  {}, epoch {}, record {}\n", utc_text(l.at_us),
                       l.who.empty() ? "-" : printable(l.who), std::max(who, std::size_t{1}), printable(l.what), what,
                       printable(l.on), on, printable(l.station), l.epoch, l.seq);
  return out;
}

}  // namespace jigwright
