// Kind "relay-check": each relay both ways: the reading that it switches must change. A relay whose contact is welded,
// or never closes, changes nothing, and is named with its role. Which relays a reading can tell depends on what lies in
// the nest:
//
//   nest = "copper short"  probe loops and the meter's paths (in ohm: nothing or open), the reference, the reversal
//   nest = "board"         a sound board without power: bleed, input short, tone, source, detector
//   nest = "powered board" the ranges, by what they make of the output
//   nest = "nothing"       the meter's zero, so that an open reading says something; then each probe's loop must be
//   open
//                          with its relay closed (`open`), or its two pins touch
//
// The board's supply relay is told by none of them: to see it open, the supply would have to stand before an open
// contact, and close onto the board from there. Loads are the kind load-check's.
// Keys: nest; readings (2); integration_cycles (1).
//
// `change` is the size of the difference of the two readings. An open path has no resistance to read: an overload there
// counts as the meter's overload point, "at least so much", and the finding states no uncertainty; two overloads are no
// change. A relay that is seen only through another one is no data while that one is missed, so that one fault is told
// once. `source` is the largest that was seen of the source: none through either of its relays is the source itself.
#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <limits>

#include "steps/common.hpp"
#include "steps/kinds.hpp"
#include "steps/tone_proof.hpp"

namespace jigwright {
namespace {

constexpr double nan = std::numeric_limits<double>::quiet_NaN();
/// Below a diode's threshold: no junction of the unpowered board conducts.
constexpr double unpowered_V = 0.2;
/// Time constants until what hangs on the output has followed.
constexpr double settle_taus = 7;
/// A change must be at least this share of the expected one.
constexpr double least_share = 0.5;
constexpr double tone_periods = 3;

const std::vector<std::string>& nest_words() {
  static const std::vector<std::string> words{"copper short", "board", "powered board", "nothing"};
  return words;
}

/// In the order in which they are told: what others are seen through comes first.
std::vector<Role> roles_told(const std::string& nest) {
  if (nest == "board")
    return {Role::bleed, Role::input_short, Role::tone_to_output, Role::source_to_input, Role::detector_to_output};
  if (nest == "powered board") return {Role::range};
  if (nest == "nothing") return {Role::meter_to_zero, Role::probe_loop};
  return {Role::probe_loop,        Role::meter_to_output,    Role::meter_to_input,
          Role::meter_to_rail_pos, Role::meter_to_rail_neg,  Role::meter_to_identity,
          Role::meter_to_zero,     Role::meter_to_reference, Role::meter_reversed};
}

/// Read in ohm over copper.
bool is_path(Role role) {
  switch (role) {
    case Role::probe_loop:
    case Role::meter_to_output:
    case Role::meter_to_input:
    case Role::meter_to_rail_pos:
    case Role::meter_to_rail_neg:
    case Role::meter_to_identity:
    case Role::meter_to_zero:
      return true;
    default:
      return false;
  }
}

bool drives(Role role) {
  return role == Role::source_to_input || role == Role::tone_to_output;
}

/// How one relay is told.
struct Entry {
  int with{-1}, without{-1}, metric{-1};  ///< without < 0: read closed alone
  Role role{};
  Accuracy range;  ///< of the meter
  bool ohm{false}, detector{false};
  double least{};
  std::vector<Role> needs;
};

/// Lays out the two settings of each relay.
class CheckMaker {
 public:
  CheckMaker(const StepContext& context, const MeterUse& use)
      : context_(context), jig_(*context.jig), use_(use), layout_(context) {}

  void add(std::size_t relay) {
    const Relay& r = jig_.relays[relay];
    Entry e;
    e.role = r.role;
    Setting s = told(r, e);
    if (!e.detector) s.stop = Fixed{use_.readings};
    s.group = group_++;
    const std::string shown = s.shown;
    s.id = r.id + "/with";
    s.shown = shown + " closed";
    e.with = layout_.add(s);
    s.id = r.id + "/without";
    s.shown = shown + " open";
    s.own.reset(relay);
    s.bus.reset(relay);
    s.group = group_++;
    e.without = layout_.add(std::move(s));
    const Unit unit = e.ohm ? Unit::ohm : Unit::volt;
    const std::string variant = relay_in_words(r);
    e.metric = layout_.metric("change", variant, unit, About::jig, e.least, std::nullopt);
    entries_.push_back(std::move(e));
  }

  /// The loop of a probe that touches nothing.
  void add_alone(std::size_t relay) {
    const Relay& r = jig_.relays[relay];
    Entry e;
    e.role = r.role;
    e.needs = {Role::meter_to_zero};
    Setting s = path(r, e);
    s.group = group_;
    s.stop = Fixed{use_.readings};
    e.with = layout_.add(std::move(s));
    e.metric = layout_.metric("open", relay_in_words(r), Unit::ohm, About::jig, e.least, std::nullopt);
    entries_.push_back(std::move(e));
  }

  void add_source() {
    if (std::none_of(entries_.begin(), entries_.end(), [](const Entry& e) { return drives(e.role); })) return;
    source_metric_ = layout_.metric("source", "", Unit::volt, About::jig, least_share * tone_V(), std::nullopt);
  }

  Layout take_layout() { return std::move(layout_); }
  std::vector<Entry> take_entries() { return std::move(entries_); }
  int source_metric() const { return source_metric_; }

 private:
  Setting told(const Relay& r, Entry& e) const {
    switch (r.role) {
      case Role::bleed:
        return bleed(r, e);
      case Role::input_short:
        return input_short(r, e);
      case Role::tone_to_output:
        return tone(r, e);
      case Role::source_to_input:
        return source(r, e);
      case Role::detector_to_output:
        return detector(r, e);
      case Role::range:
        return range(r, e);
      case Role::meter_to_reference:
      case Role::meter_reversed:
        return reference(r, e);
      default:
        return path(r, e);
    }
  }

  Setting unpowered(const Relay& r) const {
    Setting s = unpowered_setting(context_, r.id, relay_in_words(r));
    s.phase = Phase::contact;
    return s;
  }

  void in_ohm(Setting& s, Entry& e, const Accuracy& range, double change) const {
    e.ohm = true;
    e.range = range;
    e.least = least_share * change;
    s.act = use_.on(range, MeterFunction::resistance);
  }
  void in_volt(Setting& s, Entry& e, const Accuracy& range, double change) const {
    e.range = range;
    e.least = least_share * change;
    s.act = use_.on(range);
  }

  /// Over copper a path reads next to nothing; open it overloads the smallest range.
  Setting path(const Relay& r, Entry& e) const {
    Setting s = unpowered(r);
    join(s, jig_, r.role, r.of);
    const Accuracy& range = jig_.meter.resistance.front();
    in_ohm(s, e, range, range.overload * range.range);
    return s;
  }

  /// The reference against nothing, and against itself with the leads exchanged.
  Setting reference(const Relay& r, Entry& e) const {
    Setting s = unpowered(r);
    join(s, jig_, Role::meter_to_reference);
    const bool reversed = r.role == Role::meter_reversed;
    if (reversed) {
      join(s, jig_, Role::meter_reversed);
      e.needs = {Role::meter_to_reference};
    }
    in_volt(s, e, jig_.voltage_range(jig_.reference_V), (reversed ? 2 : 1) * jig_.reference_V);
    return s;
  }

  double unpowered_ohm() const { return context_.board.unpowered_ohm; }
  double parallel_ohm() const { return parallel(jig_.source.tone_ohm, unpowered_ohm()); }
  double tone_V() const { return unpowered_V * parallel_ohm() / jig_.source.tone_ohm; }
  double output_F() const { return jig_.stray_F + jig_.meter.input_F + jig_.detector.input_F; }
  double all_loads_F() const {
    double sum_F = output_F();
    for (const Load& load : jig_.loads) sum_F += load.capacitance_F;
    return sum_F;
  }
  /// For the output to follow, should the relays of all loads be welded.
  double output_settle_s(double ohm) const { return settle_taus * ohm * all_loads_F(); }

  /// The board's own resistance at OUT, and the bleed beside it.
  Setting bleed(const Relay& r, Entry& e) const {
    Setting s = unpowered(r);
    join(s, jig_, Role::bleed);
    join(s, jig_, Role::meter_to_output);
    s.settle_s += output_settle_s(unpowered_ohm());
    in_ohm(s, e, jig_.resistance_range(unpowered_ohm()), unpowered_ohm() - parallel(unpowered_ohm(), jig_.bleed_ohm));
    return s;
  }

  Setting input_short(const Relay& r, Entry& e) const {
    Setting s = unpowered(r);
    join(s, jig_, Role::input_short);
    join(s, jig_, Role::meter_to_input);
    const Accuracy& range = jig_.meter.resistance.front();
    in_ohm(s, e, range, range.overload * range.range);
    return s;
  }

  /// The source's DC through the tone's resistor, by the meter on OUT.
  Setting tone(const Relay& r, Entry& e) const {
    Setting s = unpowered(r);
    join(s, jig_, Role::tone_to_output);
    join(s, jig_, Role::meter_to_output);
    s.source.dc_V = unpowered_V;
    s.settle_s += output_settle_s(parallel_ohm());
    e.needs = {Role::bleed};
    in_volt(s, e, jig_.voltage_range(unpowered_V), tone_V());
    return s;
  }

  Setting source(const Relay& r, Entry& e) const {
    Setting s = unpowered(r);
    join(s, jig_, Role::source_to_input);
    join(s, jig_, Role::meter_to_input);
    s.source.dc_V = unpowered_V;
    e.needs = {Role::input_short};
    in_volt(s, e, jig_.voltage_range(unpowered_V), unpowered_V);
    return s;
  }

  /// A tone so low that it is above the detector's floor even with every load's relay welded.
  Setting detector(const Relay& r, Entry& e) const {
    Setting s = unpowered(r);
    join(s, jig_, Role::tone_to_output);
    join(s, jig_, Role::detector_to_output);
    const double f_Hz = jig_.source.tone_low_Hz;
    s.source = {0, unpowered_V, f_Hz};
    s.settle_s += output_settle_s(parallel_ohm());
    s.act = ReadDetector{tone_periods / f_Hz};
    const ToneFacts facts{unpowered_V, jig_.source.tone_ohm, 0, 0, jig_.detector.floor_V};
    e.detector = true;
    e.least = least_share * tone_level(facts, parallel_ohm(), all_loads_F(), f_Hz);
    e.needs = {Role::tone_to_output};
    return s;
  }

  /// One source level for all ranges, small enough for all of them closed at once.
  Setting range(const Relay& r, Entry& e) const {
    double all = 0, base = 1, own = 1;
    for (const auto& known : context_.board.ranges) {
      all += known.gain;
      if (!jig_.has(Role::range, known.id)) base = known.gain;
      if (known.id == r.of) own = known.gain;
    }
    Setting s = powered_setting(context_, r.id, relay_in_words(r));
    join(s, jig_, Role::range, r.of);
    join(s, jig_, Role::source_to_input);
    join(s, jig_, Role::meter_to_output);
    const double swing_V = context_.board.swing_V;
    s.source.dc_V = std::min(swing_V / (2 * std::max(all, 1.0)), jig_.source.max_V);
    in_volt(s, e, jig_.voltage_range(swing_V), std::abs(own - base) * s.source.dc_V);
    return s;
  }

  const StepContext& context_;
  const Jig& jig_;
  MeterUse use_;
  Layout layout_;
  std::vector<Entry> entries_;
  int source_metric_{-1};
  int group_{0};
};

/// Whether the jig has what this relay is seen through.
bool seen(const StepContext& context, const Relay& relay) {
  const Jig& jig = *context.jig;
  switch (relay.role) {
    case Role::bleed:
    case Role::tone_to_output:
      return jig.has(Role::meter_to_output);
    case Role::input_short:
    case Role::source_to_input:
      return jig.has(Role::meter_to_input);
    case Role::detector_to_output:
      return jig.has(Role::tone_to_output);
    case Role::meter_reversed:
      return jig.has(Role::meter_to_reference);
    case Role::range:
      return jig.has(Role::source_to_input) && jig.has(Role::meter_to_output) &&
             context.board.range(relay.of) != nullptr;
    default:
      return true;
  }
}

class RelayCheckStep final : public Step {
 public:
  void lay_out(const StepContext& context, const std::string& nest, const MeterUse& use) {
    use_ = use;
    detector_ = context.jig->detector;
    CheckMaker maker(context, use);
    for (const Role role : roles_told(nest))
      for (std::size_t i = 0; i < context.jig->relays.size(); ++i) {
        const Relay& relay = context.jig->relays[i];
        if (relay.role != role || !seen(context, relay)) continue;
        if (nest == "nothing" && role == Role::probe_loop)
          maker.add_alone(i);
        else
          maker.add(i);
      }
    maker.add_source();
    source_metric_ = maker.source_metric();
    entries_ = maker.take_entries();
    layout_ = maker.take_layout();
  }

  /// No relay of this jig is told.
  bool empty() const { return entries_.empty(); }

  Expansion expand(Depth) const override { return layout_.named(id); }

  std::vector<Finding> reduce(Depth, std::span<const SettingRecord> records,
                              std::span<const Setting> settings) const override {
    const Records played(records, settings, layout_.settings());
    std::vector<Seen> all;
    for (const Entry& e : entries_) {
      const auto with = played.sample(e.with), without = played.sample(e.without);
      if (with && e.without < 0) all.push_back({&e, resistance(e, *with), *with});
      if (with && without) all.push_back({&e, change(e, *with, *without), *without});
    }
    const auto source = source_seen(all);
    const bool dead = source && missed(*source, source_least());
    std::vector<Finding> out;
    for (const Seen& s : all) out.push_back(hidden(s, all, dead) ? unseen(s.change) : s.change);
    if (source) out.push_back(*source);
    return out;
  }

 private:
  struct Seen {
    const Entry* entry;
    Finding change;
    Sample without;
  };

  static bool missed(const Finding& f, double least) { return f.state == FindingState::measured && f.value < least; }

  /// A resistance, or a voltage where nothing is over range.
  Finding change(const Entry& e, const Sample& with, const Sample& without) const {
    const bool open_with = e.ohm && with.state == FindingState::over_range;
    const bool open_without = e.ohm && without.state == FindingState::over_range;
    FindingState state = FindingState::measured;
    if (!open_with) state = worse(state, with.state);
    if (!open_without) state = worse(state, without.state);
    const double top = e.range.overload * e.range.range;
    const double size = std::abs((open_with ? top : with.mean) - (open_without ? top : without.mean));
    const double u = open_with || open_without ? nan : difference_u(e, with, without, size);
    return found(e.metric, state, size, u, std::max(with.n, 1) + std::max(without.n, 1));
  }

  /// At least the overload point, where the reading is over range.
  Finding resistance(const Entry& e, const Sample& s) const {
    const bool open = s.state == FindingState::over_range;
    const double u = Combined()
                         .add(scatter(s.sd, s.n, use_.noise(e.range)))
                         .add(specified(e.range, s.mean))
                         .add(rounding(e.range.resolution))
                         .u();
    return found(e.metric, open ? FindingState::measured : s.state, open ? e.range.overload * e.range.range : s.mean,
                 open ? nan : u, std::max(s.n, 1));
  }

  double difference_u(const Entry& e, const Sample& with, const Sample& without, double size) const {
    if (e.detector)
      return Combined().add(rectangular(detector_.of_reading * size)).add(rectangular(detector_.floor_V)).u();
    return Combined()
        .add(scatter(with.sd, with.n, use_.noise(e.range)))
        .add(scatter(without.sd, without.n, use_.noise(e.range)))
        .add(specified_difference(e.range, size))
        .add(rounding(e.range.resolution), std::sqrt(2.0))
        .u();
  }

  double source_least() const {
    double least = std::numeric_limits<double>::infinity();
    for (const Entry& e : entries_)
      if (drives(e.role)) least = std::min(least, e.least);
    return least;
  }

  /// The largest change that the source made; nothing unless all that it drives was read.
  std::optional<Finding> source_seen(const std::vector<Seen>& all) const {
    Finding most = found(source_metric_, FindingState::measured, 0, nan, 0);
    std::ptrdiff_t n = 0;
    for (const Seen& s : all) {
      if (!drives(s.entry->role)) continue;
      ++n;
      most.n += s.change.n;
      most.state = worse(most.state, s.change.state);
      if (s.change.value > most.value) most.value = s.change.value, most.u = s.change.u;
    }
    const auto asked = std::count_if(entries_.begin(), entries_.end(), [](const Entry& e) { return drives(e.role); });
    if (source_metric_ < 0 || n != asked) return std::nullopt;
    return found(source_metric_, most.state, most.value, most.u, most.n);
  }

  /// What this relay is seen through is at fault, or the source, or the reference that never leaves the meter.
  static bool hidden(const Seen& s, const std::vector<Seen>& all, bool source_dead) {
    const Entry& e = *s.entry;
    if (source_dead && (drives(e.role) || e.detector)) return true;
    const bool stays = reference_stays(all);
    if (stays) return is_path(e.role) || e.role == Role::meter_reversed;
    return std::any_of(all.begin(), all.end(), [&](const Seen& other) {
      const bool needed = std::find(e.needs.begin(), e.needs.end(), other.entry->role) != e.needs.end();
      const bool beside = e.role == Role::meter_to_reference && is_path(other.entry->role);
      return (needed || beside) && missed(other.change, other.entry->least);
    });
  }

  static bool reference_stays(const std::vector<Seen>& all) {
    return std::any_of(all.begin(), all.end(), [](const Seen& s) {
      return s.entry->role == Role::meter_to_reference && s.without.state == FindingState::measured &&
             std::abs(s.without.mean) > s.entry->least;
    });
  }

  static Finding unseen(const Finding& f) {
    return found(f.metric, worse(FindingState::no_data, f.state), nan, nan, f.n);
  }

  MeterUse use_;
  DetectorFacts detector_;
  std::vector<Entry> entries_;
  int source_metric_{-1};
  Layout layout_;
};

}  // namespace

std::unique_ptr<Step> read_relay_check(TableReader& reader, const StepContext& context) {
  const CleanRead clean(reader, context);
  auto step = std::make_unique<RelayCheckStep>();
  const auto nest = reader.need_choice("nest", nest_words());
  if (nest.value == "nothing") need_role(reader, context, Role::meter_to_zero);
  const MeterUse use = read_meter_use(reader, context, 2);
  if (!clean.ok()) return step;
  step->lay_out(context, nest.value, use);
  if (step->empty())
    reader.fault(nest.region, fmt::format("no relay of this jig can be told with a {} in the nest", nest.value),
                 "take the step out");
  return step;
}

}  // namespace jigwright
