#include "steps/common.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>

#include "base/nearest.hpp"
#include "base/summary.hpp"

namespace jigwright {
namespace {

constexpr double ask_usual_s = 5;          // our estimate of a person at the jig
constexpr double ask_worst_s = 60;         // likewise
constexpr double supply_reading_s = 5e-3;  // our estimate of one read-back
constexpr std::size_t most_taken = 256;

std::uint32_t leased_by(Role role) {
  switch (role) {
    case Role::detector_to_output:
      return use_detector;
    case Role::source_to_input:
    case Role::tone_to_output:
      return use_source;
    default:
      return joins_shared(role) ? static_cast<std::uint32_t>(use_meter) : 0u;
  }
}

std::uint32_t leased_by(const Act& act) {
  if (std::holds_alternative<ReadMeter>(act)) return use_meter;
  if (std::holds_alternative<ReadDetector>(act)) return use_detector;
  if (std::holds_alternative<ReadSupply>(act)) return use_supply;
  if (std::holds_alternative<Ask>(act)) return use_person;
  return 0;
}

Setting plain_setting(const StepContext& context, std::string id, std::string shown, Phase phase) {
  Setting s;
  s.id = std::move(id);
  s.shown = std::move(shown);
  s.step = context.index;
  s.phase = phase;
  s.settle_s = context.board.settle_s;
  s.act = Dwell{};
  s.stop = Fixed{1};
  return s;
}

int usual_readings(const StopRule& rule) {
  if (const auto* fixed = std::get_if<Fixed>(&rule)) return std::max(fixed->n, 1);
  return std::max(std::get<Stable>(rule).window, 1);
}

FindingState state_of(const Reading& reading) {
  if (reading.state == ReadingState::overload) return FindingState::over_range;
  const bool ok = reading.state == ReadingState::ok && std::isfinite(reading.value);
  return ok ? FindingState::measured : FindingState::no_data;
}

FindingState state_of(const SettingRecord& record, const StopRule& rule) {
  FindingState state = FindingState::measured;
  for (const Reading& reading : record.readings) state = worse(state, state_of(reading));
  if (state != FindingState::measured) return state;
  const Next next = decide(rule, record.readings);
  if (next == Next::more || record.readings.empty()) return FindingState::no_data;
  if (next == Next::gave_up) return FindingState::not_settled;
  return record.ended == Next::enough ? FindingState::measured : FindingState::no_data;
}

std::span<const Reading> counted(const SettingRecord& record, const StopRule& rule) {
  const std::span<const Reading> all(record.readings);
  std::size_t n = std::min(all.size(), most_taken);
  if (const auto* s = std::get_if<Stable>(&rule)) n = std::min(n, static_cast<std::size_t>(std::max(s->window, 1)));
  return all.last(n);
}

std::vector<std::string> roles_of(const Jig& jig) {
  std::vector<std::string> out;
  for (const Relay& relay : jig.relays) {
    const std::string name(role_name(relay.role));
    if (std::find(out.begin(), out.end(), name) == out.end()) out.push_back(name);
  }
  return out;
}

std::vector<std::string> ids_of(const std::vector<BoardFacts::Range>& ranges) {
  std::vector<std::string> out;
  for (const auto& r : ranges) out.push_back(r.id);
  return out;
}

std::optional<double> number(const Node& node) {
  if (const auto* i = std::get_if<std::int64_t>(&node.value)) return static_cast<double>(*i);
  if (const auto* d = std::get_if<double>(&node.value)) return *d;
  return std::nullopt;
}

double read_cycles(TableReader& reader) {
  const Node* node = reader.node("integration_cycles");
  if (node == nullptr) return 1;
  const auto value = number(*node);
  if (!value || !(*value >= 0.01 && *value <= 100)) {
    reader.fault(node->region, "\"integration_cycles\": expected a number of mains cycles from 0.01 to 100",
                 "write 1, or another whole number of cycles");
    return 1;
  }
  if (*value != std::floor(*value))
    reader.warning(node->region, "\"integration_cycles\" is no whole number: mains hum stays in the readings",
                   "write a whole number of cycles");
  return *value;
}

/// Two ranges without relays can't be told apart on this jig.
void check_default_range(TableReader& reader, const StepContext& context, const Located<std::string>& name) {
  if (context.jig->has(Role::range, name.value)) return;
  for (const auto& other : context.board.ranges) {
    if (other.id == name.value || context.jig->has(Role::range, other.id)) continue;
    reader.fault(name.region,
                 fmt::format("range \"{}\" has no relay on this jig, nor has range \"{}\"", name.value, other.id),
                 fmt::format("only one range can be the board's default; the jig switches: {}",
                             listed(context.jig->range_ids())));
    return;
  }
}

}  // namespace

bool joins_shared(Role role) {
  switch (role) {
    case Role::probe_loop:
    case Role::meter_to_output:
    case Role::meter_reversed:
    case Role::meter_to_input:
    case Role::meter_to_rail_pos:
    case Role::meter_to_rail_neg:
    case Role::meter_to_identity:
    case Role::meter_to_reference:
    case Role::meter_to_zero:
    case Role::source_to_input:
    case Role::tone_to_output:
    case Role::detector_to_output:
      return true;
    default:
      return false;
  }
}

void join(Setting& setting, const Jig& jig, Role role, std::string_view of) {
  (joins_shared(role) ? setting.bus : setting.own) |= jig.relays_of(role, of);
  setting.resources |= leased_by(role);
}

Setting unpowered_setting(const StepContext& context, std::string id, std::string shown) {
  return plain_setting(context, std::move(id), std::move(shown), Phase::unpowered);
}

Setting powered_setting(const StepContext& context, std::string id, std::string shown) {
  Setting s = plain_setting(context, std::move(id), std::move(shown), Phase::powered);
  s.supply = {context.board.rail_V, context.board.limit_A};
  join(s, *context.jig, Role::supply_to_board);
  return s;
}

std::string relay_in_words(const Relay& relay) {
  return fmt::format("{}, {}{}{}", relay.id, role_name(relay.role), relay.of.empty() ? "" : " ", relay.of);
}

void short_input(Setting& setting, const Jig& jig) {
  if (jig.has(Role::input_short)) join(setting, jig, Role::input_short);
}

double Layout::reading_s(const Act& act) const {
  if (const auto* meter = std::get_if<ReadMeter>(&act))
    return meter->setup.integration_s + jig_->meter.reading_overhead_s;
  if (const auto* detector = std::get_if<ReadDetector>(&act)) return detector->dwell_s;
  if (std::holds_alternative<ReadSupply>(act)) return supply_reading_s;
  return 0;
}

int Layout::add(Setting setting) {
  setting.step = step_;
  setting.position = static_cast<int>(expansion_.settings.size());
  setting.resources |= leased_by(setting.act);
  const bool ask = std::holds_alternative<Ask>(setting.act);
  const double each_s = reading_s(setting.act);
  setting.usual_s = setting.settle_s + (ask ? ask_usual_s : each_s * usual_readings(setting.stop));
  setting.worst_s = setting.settle_s + (ask ? ask_worst_s : each_s * most_readings(setting.stop));
  expansion_.settings.push_back(std::move(setting));
  return expansion_.settings.back().position;
}

int Layout::metric(std::string name, std::string variant, Unit unit, About about) {
  return metric(std::move(name), std::move(variant), unit, about, std::nullopt, std::nullopt);
}

int Layout::metric(std::string name, std::string variant, Unit unit, About about, std::optional<double> low,
                   std::optional<double> high) {
  Metric m;
  m.name = {"", std::move(name), std::move(variant)};
  m.unit = unit;
  m.about = about;
  m.own_low = low;
  m.own_high = high;
  expansion_.metrics.push_back(std::move(m));
  return static_cast<int>(expansion_.metrics.size()) - 1;
}

int Layout::nominal(int metric, double value) {
  expansion_.metrics[static_cast<std::size_t>(metric)].nominal = value;
  return metric;
}

Expansion Layout::named(const std::string& step_id) const {
  Expansion out = expansion_;
  for (Setting& s : out.settings) {
    s.id = step_id + "/" + s.id;
    if (auto* ask = std::get_if<Ask>(&s.act)) ask->step = step_id;
  }
  for (Metric& m : out.metrics) m.name.step = step_id;
  return out;
}

Sample take(const SettingRecord& record, const StopRule& rule) {
  Sample sample;
  sample.state = state_of(record, rule);
  if (sample.state != FindingState::measured) return sample;
  std::array<double, most_taken> values;
  const auto readings = counted(record, rule);
  double sum_s = 0;
  for (std::size_t i = 0; i < readings.size(); ++i) {
    values[i] = readings[i].value;
    sum_s += seconds(readings[i].at);
  }
  const Summary summary = summarize({values.data(), readings.size()});
  sample.mean = summary.mean;
  sample.sd = summary.sd;
  sample.n = static_cast<int>(summary.n);
  sample.at_s = sum_s / static_cast<double>(readings.size());
  return sample;
}

Records::Records(std::span<const SettingRecord> records, std::span<const Setting> settings, std::size_t positions)
    : settings_(settings), by_position_(positions, nullptr) {
  for (const SettingRecord& record : records) {
    if (record.setting < 0 || static_cast<std::size_t>(record.setting) >= settings.size()) continue;
    const int position = settings[static_cast<std::size_t>(record.setting)].position;
    if (position >= 0 && static_cast<std::size_t>(position) < positions)
      by_position_[static_cast<std::size_t>(position)] = &record;
  }
}

std::optional<Sample> Records::sample(int position) const {
  if (position < 0 || static_cast<std::size_t>(position) >= by_position_.size()) return std::nullopt;
  const SettingRecord* record = by_position_[static_cast<std::size_t>(position)];
  if (record == nullptr) return std::nullopt;
  return take(*record, settings_[static_cast<std::size_t>(record->setting)].stop);
}

Finding found(int metric, FindingState state, double value, double u, int n) {
  Finding f;
  f.metric = metric;
  f.n = n;
  f.state = state == FindingState::measured && !std::isfinite(value) ? FindingState::no_data : state;
  if (f.state != FindingState::measured) return f;
  f.value = value;
  if (std::isfinite(u)) f.u = u;
  return f;
}

bool CleanRead::ok() const {
  if (reader_->faults().count(Severity::fault) != before_ || context_->jig == nullptr) return false;
  const Jig& jig = *context_->jig;
  return !jig.meter.voltage.empty() && !jig.meter.resistance.empty() && jig.mains_Hz > 0;
}

void need_role(TableReader& reader, const StepContext& context, Role role) {
  if (context.jig == nullptr || context.jig->relays.empty() || context.jig->has(role)) return;
  reader.fault(reader.region(), fmt::format("the jig has no relay with role \"{}\"", role_name(role)),
               fmt::format("the jig's relays have the roles: {}", listed(roles_of(*context.jig))));
}

MeterUse read_meter_use(TableReader& reader, const StepContext& context, int usual) {
  MeterUse use;
  const auto readings = reader.integer("readings", 1, 200);
  use.readings = readings ? static_cast<int>(readings->value) : usual;
  use.cycles = read_cycles(reader);
  use.integration_s = context.jig != nullptr ? use.cycles * context.jig->plc_s() : 0;
  return use;
}

std::optional<BoardFacts::Range> find_range(TableReader& reader, const StepContext& context,
                                            const Located<std::string>& name) {
  const auto* range = context.board.range(name.value);
  if (range == nullptr) {
    const auto ids = ids_of(context.board.ranges);
    const auto near = nearest(name.value, ids);
    reader.fault(name.region, fmt::format("range \"{}\" is not one of this board's", name.value),
                 fmt::format("the board has: {}", listed(ids)) + (near ? fmt::format("; write \"{}\"", *near) : ""));
    return std::nullopt;
  }
  if (context.jig != nullptr) check_default_range(reader, context, name);
  return *range;
}

std::vector<BoardFacts::Range> read_ranges(TableReader& reader, const StepContext& context) {
  std::vector<BoardFacts::Range> out;
  auto names = reader.texts("ranges");
  if (!reader.has("ranges"))
    for (const auto& r : context.board.ranges) names.push_back({r.id, reader.region()});
  for (const auto& name : names) {
    const auto range = find_range(reader, context, name);
    if (!range) continue;
    const auto ids = ids_of(out);
    if (std::find(ids.begin(), ids.end(), range->id) != ids.end())
      reader.fault(name.region, fmt::format("range \"{}\" is named twice", name.value), "name each range once");
    else
      out.push_back(*range);
  }
  return out;
}

void check_level(TableReader& reader, const StepContext& context, const Located<double>& level_V, double gain) {
  const double size = std::abs(level_V.value);
  if (size > context.board.swing_V) {
    reader.fault(level_V.region, fmt::format("output level {} is beyond the board's swing", level_text(level_V.value)),
                 fmt::format("stay within +-{}", format_quantity(context.board.swing_V, Unit::volt)));
    return;
  }
  if (context.jig == nullptr || !(gain != 0)) return;
  const double most_V = context.jig->source.max_V;
  if (size / std::abs(gain) > most_V)
    reader.fault(level_V.region,
                 fmt::format("output level {} needs {} from the source", level_text(level_V.value),
                             format_quantity(level_V.value / gain, Unit::volt)),
                 fmt::format("the jig's source reaches {}", format_quantity(most_V, Unit::volt)));
}

std::string level_text(double level_V) {
  return (level_V > 0 ? "+" : "") + format_quantity(level_V == 0 ? 0.0 : level_V, Unit::volt);
}

}  // namespace jigwright
