// Kind "offset-under-load": the output under every load that the plan names, at the output levels it names, each
// against the open output before and after it, by the meter and by the level detector.
//
// Keys: range; loads ("open" is tolerated); short_loads (the loads of the short depth, all when absent); levels ("0
// V"); readings (10) or stable = { window = 5, tolerance = "50 uV", max = 40 }; integration_cycles (1); bracket_every
// (0 = open only before and after all); detector_dwell ("2 ms"); return_after ("200 ms"); power_up_loads (none);
// settle_to
// ("10 uV"); prove (true; false wants prove_reason); proof_tolerance ("30 %").
//
// In order: without power, a tone proves each load at the pad (tone_proof.hpp), and that nothing hangs on the open
// output. With power, per level: open, loads, open, ... open; meter and detector stay joined in all of them, so that
// the total load is the declared one and the same for both. Then a dwell and the open output of the first level once
// more. Then, for each power-up load: power off, the load on, power on, read; and the same without the load.
//
// `load_delta` is a load's mean less the straight line through the means of the two open readings about it, at the time
// of the load's own readings: what drifts linearly in time is out. `noise` is the standard deviation of readings of
// aperture T, in the bandwidth 1/(2 T). `output` keeps the thermal EMF of the path, and says so in its uncertainty.
#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>

#include "base/nearest.hpp"
#include "steps/common.hpp"
#include "steps/kinds.hpp"
#include "steps/tone_proof.hpp"

namespace jigwright {
namespace {

/// Below a diode's threshold: no junction of the unpowered board conducts.
constexpr double tone_V = 0.2;
/// Time constants that a tone's start needs to die away: e^-5 is 0.7 %.
constexpr double tone_settle_taus = 5;
constexpr double tone_periods = 3;
/// For rails and load to fall when the power goes: our estimate, at least this.
constexpr double power_off_s = 0.1;
constexpr double discharge_taus = 5;
constexpr double level_headroom = 1.05;
/// The open output may show half as much again as the stray capacitance that the jig declares.
constexpr double open_room = 1.5;
constexpr double nan = std::numeric_limits<double>::quiet_NaN();

struct UnderLoadKeys {
  BoardFacts::Range range;
  std::vector<Load> loads;
  std::vector<Load> short_loads;
  std::vector<Load> power_up_loads;
  std::vector<double> levels_V;
  MeterUse use;
  StopRule stop;
  int bracket_every{};
  double detector_dwell_s{}, return_after_s{}, settle_to_V{};
  bool prove{true};
  double proof_tolerance{};
};

/// Positions of one state's two readings.
struct ReadPair {
  int dc{-1};
  int detector{-1};
};

struct ProofRead {
  int position{-1};
  double frequency_Hz{};
  int metric{-1};
};

struct Proof {
  int base{-1};
  ProofRead open;
  std::vector<ProofRead> loads;
};

struct LoadRead {
  ReadPair read;
  std::size_t before{};  ///< of the open readings; the next one is after
  int output{}, delta{}, noise{}, detector{};
};

struct LevelRead {
  Accuracy range;
  std::vector<ReadPair> opens;
  std::vector<LoadRead> loads;
  int output{}, noise{}, detector{};
};

struct PowerUpRead {
  ReadPair loaded;
  int open{-1};
  int delta{}, detector{};
};

/// Everything at one depth.
struct Sweep {
  Layout layout;
  Proof proof;
  std::vector<LevelRead> levels;
  int return_position{-1}, return_metric{-1};
  std::vector<PowerUpRead> power_ups;
};

// --- expand ---------------------------------------------------------------------------------------------------------

class SweepMaker {
 public:
  SweepMaker(const StepContext& context, const UnderLoadKeys& keys, const std::vector<Load>& loads)
      : context_(context), jig_(*context.jig), keys_(keys), loads_(loads) {
    sweep_.layout = Layout(context);
  }

  Sweep make() {
    if (keys_.prove) add_proof();
    for (const double level_V : keys_.levels_V) add_level(level_V);
    add_return();
    for (const Load& load : keys_.power_up_loads)
      if (holds(load)) add_power_up(load);
    return std::move(sweep_);
  }

 private:
  bool holds(const Load& load) const {
    return std::any_of(loads_.begin(), loads_.end(), [&](const Load& l) { return l.id == load.id; });
  }

  double parallel_ohm() const { return parallel(jig_.source.tone_ohm, context_.board.unpowered_ohm); }
  double open_F() const { return jig_.stray_F + jig_.detector.input_F; }

  void add_proof() {
    const double low_Hz = jig_.source.tone_low_Hz;
    const double high_Hz = jig_.source.tone_high_Hz;
    sweep_.proof.base = add_tone("proof/open/low", "proof of open", nullptr, low_Hz);
    sweep_.proof.open.position = add_tone("proof/open/high", "proof of open", nullptr, high_Hz);
    sweep_.proof.open.frequency_Hz = high_Hz;
    sweep_.proof.open.metric = sweep_.layout.nominal(
        sweep_.layout.metric("load_proof", "open", Unit::farad, About::jig, 0.0, open_room * open_F()), open_F());
    for (const Load& load : loads_) add_load_proof(load);
  }

  void add_load_proof(const Load& load) {
    const double total_F = load.capacitance_F + open_F();
    ProofRead read;
    read.frequency_Hz = tone_frequency(parallel_ohm(), total_F, jig_.source.tone_low_Hz, jig_.source.tone_high_Hz);
    read.position = add_tone("proof/" + load.id, "proof of " + load.id, &load, read.frequency_Hz);
    const double room_F = load.capacitance_F * keys_.proof_tolerance;
    read.metric = sweep_.layout.nominal(sweep_.layout.metric("load_proof", load.id, Unit::farad, About::jig,
                                                             load.capacitance_F - room_F, load.capacitance_F + room_F),
                                        load.capacitance_F);
    sweep_.proof.loads.push_back(read);
  }

  int add_tone(std::string id, std::string shown, const Load* load, double frequency_Hz) {
    Setting s = unpowered_setting(context_, std::move(id), std::move(shown));
    if (load != nullptr) join(s, jig_, Role::load, load->id);
    join(s, jig_, Role::tone_to_output);
    join(s, jig_, Role::detector_to_output);
    s.source = {0, tone_V, frequency_Hz};
    const double total_F = open_F() + (load != nullptr ? load->capacitance_F : 0);
    s.settle_s += tone_settle_taus * parallel_ohm() * total_F;
    s.act = ReadDetector{std::max(keys_.detector_dwell_s, tone_periods / frequency_Hz)};
    return sweep_.layout.add(std::move(s));
  }

  /// Order counts: the open readings stand between the blocks of loads; inside a block the order is free.
  void add_level(double level_V) {
    const std::string level = level_text(level_V);
    LevelRead read;
    read.range = range_for(level_V);
    const std::size_t block = keys_.bracket_every > 0 ? static_cast<std::size_t>(keys_.bracket_every) : loads_.size();
    for (std::size_t i = 0; i < loads_.size(); ++i) {
      if (i % block == 0) add_open(read, level_V);
      add_load(read, loads_[i], level_V);
    }
    add_open(read, level_V);
    const std::string variant = "open at " + level;
    read.output = volts("output", variant);
    read.noise = volts("noise", variant);
    read.detector = volts("detector", variant);
    sweep_.levels.push_back(std::move(read));
  }

  const Accuracy& range_for(double level_V) const { return jig_.voltage_range(std::abs(level_V) * level_headroom); }

  int volts(const char* name, const std::string& variant) {
    return sweep_.layout.metric(name, variant, Unit::volt, About::board);
  }

  void add_open(LevelRead& read, double level_V) {
    ++group_;
    const std::string name = fmt::format("open {}", read.opens.size() + 1);
    read.opens.push_back(
        add_pair(name + "/" + level_text(level_V), "open at " + level_text(level_V), nullptr, level_V));
    ++group_;
  }

  void add_load(LevelRead& read, const Load& load, double level_V) {
    const std::string level = level_text(level_V);
    const std::string variant = load.id + " at " + level;
    LoadRead l;
    l.before = read.opens.size() - 1;
    l.read = add_pair(load.id + "/" + level, variant, &load, level_V);
    l.output = volts("output", variant);
    l.delta = sweep_.layout.nominal(volts("load_delta", variant), 0);
    l.noise = volts("noise", variant);
    l.detector = volts("detector", variant);
    read.loads.push_back(l);
  }

  ReadPair add_pair(const std::string& id, const std::string& shown, const Load* load, double level_V) {
    Setting s = at_level(id + "/dc", shown, load, level_V);
    s.act = keys_.use.on(range_for(level_V));
    s.stop = keys_.stop;
    ReadPair pair;
    pair.dc = sweep_.layout.add(s);
    s.id = id + "/detector";
    s.act = ReadDetector{keys_.detector_dwell_s};
    s.stop = Fixed{1};
    pair.detector = sweep_.layout.add(std::move(s));
    return pair;
  }

  /// The board at an output level with a load (nullptr = open), meter and detector both on the output.
  Setting at_level(std::string id, std::string shown, const Load* load, double level_V) {
    Setting s = powered_setting(context_, std::move(id), std::move(shown));
    s.group = group_;
    join(s, jig_, Role::range, keys_.range.id);
    if (load != nullptr) join(s, jig_, Role::load, load->id);
    join(s, jig_, Role::meter_to_output);
    join(s, jig_, Role::detector_to_output);
    if (level_V == 0) {
      join(s, jig_, Role::input_short);
    } else {
      join(s, jig_, Role::source_to_input);
      s.source.dc_V = level_V / keys_.range.gain;
    }
    s.settle_s += load_settle_s(load, level_V);
    return s;
  }

  /// First-order settling of the total load through all that is in series with it, from the far end of the output's
  /// swing to settle_to: R C ln(step / settle_to); and C step / I, the time at the least output current.
  double load_settle_s(const Load* load, double level_V) const {
    const double total_F =
        jig_.stray_F + jig_.meter.input_F + jig_.detector.input_F + (load != nullptr ? load->capacitance_F : 0);
    const double series_ohm = context_.board.output_ohm + jig_.line_ohm + (load != nullptr ? load->series_ohm : 0);
    const double step_V = context_.board.swing_V + std::abs(level_V);
    const double taus = std::log(std::max(step_V / keys_.settle_to_V, 1.0));
    const double charging_s = context_.board.output_A > 0 ? total_F * step_V / context_.board.output_A : 0;
    return series_ohm * total_F * taus + charging_s;
  }

  void add_return() {
    const double level_V = keys_.levels_V.front();
    ++group_;
    Setting dwell = at_level("return/dwell", "dwell before the last open", nullptr, level_V);
    dwell.settle_s = keys_.return_after_s;
    sweep_.layout.add(dwell);
    ++group_;
    Setting s = at_level("return/" + level_text(level_V), "return to open", nullptr, level_V);
    s.act = keys_.use.on(range_for(level_V));
    s.stop = keys_.stop;
    sweep_.return_position = sweep_.layout.add(std::move(s));
    sweep_.return_metric = sweep_.layout.nominal(volts("return_to_open", level_text(level_V)), 0);
  }

  void add_power_up(const Load& load) {
    const std::string id = "power-up/" + load.id;
    const std::string shown = "power-up with " + load.id;
    PowerUpRead read;
    add_cycle(id + "/loaded", shown, &load, load);
    read.loaded = add_pair(id + "/loaded", shown, &load, 0);
    add_cycle(id + "/open", shown + ", open after", nullptr, load);
    Setting s = at_level(id + "/open/dc", shown + ", open after", nullptr, 0);
    s.act = keys_.use.on(range_for(0));
    s.stop = keys_.stop;
    read.open = sweep_.layout.add(std::move(s));
    read.delta = sweep_.layout.nominal(volts("power_up_delta", load.id), 0);
    read.detector = volts("power_up_detector", load.id);
    sweep_.power_ups.push_back(read);
  }

  /// Power off until rails and load are down, then on for the warm-up, the load as it will be read.
  void add_cycle(const std::string& id, const std::string& shown, const Load* load, const Load& charged) {
    ++group_;
    Setting off = at_level(id + "/off", shown + ": power off", load, 0);
    off.supply = {};
    off.resources |= use_supply;
    off.settle_s = std::max(power_off_s, discharge_taus * context_.board.unpowered_ohm * charged.capacitance_F);
    sweep_.layout.add(std::move(off));
    ++group_;
    Setting on = at_level(id + "/on", shown + ": warm-up", load, 0);
    on.resources |= use_supply;
    on.settle_s = context_.board.warm_up_s;
    sweep_.layout.add(std::move(on));
    ++group_;
  }

  const StepContext& context_;
  const Jig& jig_;
  const UnderLoadKeys& keys_;
  const std::vector<Load>& loads_;
  Sweep sweep_;
  int group_{0};
};

// --- reduce ---------------------------------------------------------------------------------------------------------

ToneFacts tone_facts(const Jig& jig) {
  return {tone_V, jig.source.tone_ohm, jig.detector.of_reading, jig.source.tone_of_setting, jig.detector.floor_V};
}

/// Of a standard deviation from n readings: s / sqrt(2 (n - 1)) (JCGM 100 E.4.3, normal readings).
double deviation_u(double sd, int n) {
  return n > 1 ? sd / std::sqrt(2.0 * (n - 1)) : nan;
}

class UnderLoadStep final : public Step {
 public:
  void lay_out(const StepContext& context, const UnderLoadKeys& keys) {
    use_ = keys.use;
    detector_ = context.jig->detector;
    tone_ = tone_facts(*context.jig);
    zero_range_ = context.jig->voltage_range(0);
    sweeps_[index(Depth::full)] = SweepMaker(context, keys, keys.loads).make();
    sweeps_[index(Depth::shortened)] = SweepMaker(context, keys, keys.short_loads).make();
  }

  Expansion expand(Depth depth) const override { return sweeps_[index(depth)].layout.named(id); }

  std::vector<Finding> reduce(Depth depth, std::span<const SettingRecord> records,
                              std::span<const Setting> settings) const override {
    const Sweep& sweep = sweeps_[index(depth)];
    const Records played(records, settings, sweep.layout.settings());
    std::vector<Finding> out;
    out.reserve(sweep.layout.metrics());
    reduce_proof(sweep.proof, played, out);
    for (const LevelRead& level : sweep.levels) reduce_level(level, played, out);
    reduce_return(sweep, played, out);
    for (const PowerUpRead& read : sweep.power_ups) reduce_power_up(read, played, out);
    return out;
  }

 private:
  static std::size_t index(Depth depth) { return static_cast<std::size_t>(depth); }

  void reduce_proof(const Proof& proof, const Records& played, std::vector<Finding>& out) const {
    const auto base_read = played.sample(proof.base);
    const auto open_read = played.sample(proof.open.position);
    if (!base_read || !open_read) return;
    const FindingState state = worse(base_read->state, open_read->state);
    const ToneBase base = tone_base(tone_, base_read->mean);
    const auto open = tone_capacitance(tone_, base, open_read->mean, proof.open.frequency_Hz);
    out.push_back(found(proof.open.metric, state, open.value_F, open.u_F, base_read->n + open_read->n));
    for (const ProofRead& load : proof.loads) {
      const auto read = played.sample(load.position);
      if (!read) continue;
      const auto all = tone_capacitance(tone_, base, read->mean, load.frequency_Hz);
      const double u_F = Combined().add(all.u_F).add(open.u_F).u();
      out.push_back(found(load.metric, worse(state, read->state), all.value_F - open.value_F, u_F,
                          base_read->n + open_read->n + read->n));
    }
  }

  /// What scatters in a mean, and its digit.
  double random_u(const Sample& sample, const Accuracy& range) const {
    return Combined().add(scatter(sample.sd, sample.n, use_.noise(range))).add(rounding(range.resolution)).u();
  }

  Finding output(int metric, const Sample& sample, const Accuracy& range) const {
    const double u =
        Combined().add(random_u(sample, range)).add(specified(range, sample.mean)).add(rectangular(path_emf_V)).u();
    return found(metric, sample.state, sample.mean, u, sample.n);
  }

  Finding detector(int metric, const Sample& sample) const {
    const double u =
        Combined().add(rectangular(detector_.of_reading * sample.mean)).add(rectangular(detector_.floor_V)).u();
    return found(metric, sample.state, sample.mean, u, sample.n);
  }

  static Finding noise(int metric, const Sample& sample) {
    return found(metric, sample.state, sample.n > 1 ? sample.sd : nan, deviation_u(sample.sd, sample.n), sample.n);
  }

  void reduce_level(const LevelRead& level, const Records& played, std::vector<Finding>& out) const {
    std::vector<std::optional<Sample>> opens;
    opens.reserve(level.opens.size());
    for (const ReadPair& open : level.opens) opens.push_back(played.sample(open.dc));
    for (const LoadRead& load : level.loads) {
      if (const auto dc = played.sample(load.read.dc)) {
        out.push_back(output(load.output, *dc, level.range));
        out.push_back(noise(load.noise, *dc));
        const auto& before = opens[load.before];
        const auto& after = opens[load.before + 1];
        if (before && after) out.push_back(load_delta(load.delta, *dc, *before, *after, level.range));
      }
      if (const auto read = played.sample(load.read.detector)) out.push_back(detector(load.detector, *read));
    }
    reduce_opens(level, opens, played, out);
  }

  Finding load_delta(int metric, const Sample& load, const Sample& before, const Sample& after,
                     const Accuracy& range) const {
    const FindingState state = worse(load.state, worse(before.state, after.state));
    const double span_s = after.at_s - before.at_s;
    const double share = span_s > 0 ? (load.at_s - before.at_s) / span_s : 0.5;
    const double delta_V = load.mean - (before.mean + share * (after.mean - before.mean));
    const double u = Combined()
                         .add(random_u(load, range))
                         .add(random_u(before, range), 1 - share)
                         .add(random_u(after, range), share)
                         .add(specified_difference(range, delta_V))
                         .u();
    return found(metric, state, delta_V, u, load.n + before.n + after.n);
  }

  /// All open readings of a level as one: mean of means, root mean square of deviations, largest detector level.
  void reduce_opens(const LevelRead& level, std::span<const std::optional<Sample>> opens, const Records& played,
                    std::vector<Finding>& out) const {
    if (const auto all = pooled(opens)) {
      out.push_back(output(level.output, *all, level.range));
      out.push_back(noise(level.noise, *all));
    }
    if (const auto most = largest_detector(level, played)) out.push_back(detector(level.detector, *most));
  }

  static std::optional<Sample> pooled(std::span<const std::optional<Sample>> opens) {
    Sample all;
    all.state = FindingState::measured;
    double squares = 0;
    for (const auto& open : opens) {
      if (!open) return std::nullopt;
      all.state = worse(all.state, open->state);
      all.mean += open->mean;
      squares += open->sd * open->sd;
      all.n += open->n;
    }
    const auto count = static_cast<double>(opens.size());
    all.mean /= count;
    all.sd = std::sqrt(squares / count);
    return all;
  }

  static std::optional<Sample> largest_detector(const LevelRead& level, const Records& played) {
    Sample most;
    most.state = FindingState::measured;
    for (const ReadPair& open : level.opens) {
      const auto read = played.sample(open.detector);
      if (!read) return std::nullopt;
      most.state = worse(most.state, read->state);
      most.mean = std::max(most.mean, read->mean);
      most.n += read->n;
    }
    return most;
  }

  Finding difference(int metric, const Sample& a, const Sample& b, const Accuracy& range) const {
    const double value_V = a.mean - b.mean;
    const double u = Combined()
                         .add(random_u(a, range))
                         .add(random_u(b, range))
                         .add(specified_difference(range, value_V))
                         .add(rectangular(path_emf_drift_V))
                         .u();
    return found(metric, worse(a.state, b.state), value_V, u, a.n + b.n);
  }

  void reduce_return(const Sweep& sweep, const Records& played, std::vector<Finding>& out) const {
    if (sweep.levels.empty()) return;
    const LevelRead& first = sweep.levels.front();
    const auto before = played.sample(first.opens.front().dc);
    const auto after = played.sample(sweep.return_position);
    if (before && after) out.push_back(difference(sweep.return_metric, *after, *before, first.range));
  }

  void reduce_power_up(const PowerUpRead& read, const Records& played, std::vector<Finding>& out) const {
    const auto loaded = played.sample(read.loaded.dc);
    const auto open = played.sample(read.open);
    if (loaded && open) out.push_back(difference(read.delta, *loaded, *open, zero_range_));
    if (const auto level = played.sample(read.loaded.detector)) out.push_back(detector(read.detector, *level));
  }

  MeterUse use_;
  DetectorFacts detector_;
  ToneFacts tone_;
  Accuracy zero_range_;
  std::array<Sweep, 2> sweeps_;
};

// --- read -----------------------------------------------------------------------------------------------------------

std::optional<double> as_farad(const std::string& text) {
  for (const char* tail : {"", "F"})
    if (const auto value = parse_quantity(text + tail, Unit::farad)) return value.value();
  return std::nullopt;
}

bool alike(double a, double b, double ratio) {
  return std::abs(a - b) <= ratio * std::abs(b);
}

/// The jig's load of the same capacitance by name, else as measured, else by spelling.
std::optional<std::string> suggested(const Jig& jig, const std::string& text) {
  const auto value_F = as_farad(text);
  if (value_F) {
    for (const Load& load : jig.loads)
      if (const auto named_F = as_farad(load.id); named_F && alike(*named_F, *value_F, 1e-9)) return load.id;
    for (const Load& load : jig.loads)
      if (alike(load.capacitance_F, *value_F, load.tolerance + 0.05)) return load.id;
  }
  return nearest(text, jig.load_ids());
}

void unknown_load(TableReader& reader, const Jig& jig, const Located<std::string>& name) {
  const auto near = suggested(jig, name.value);
  reader.fault(
      name.region, fmt::format("load \"{}\" is not on this jig", name.value),
      fmt::format("the jig has: {}", listed(jig.load_ids())) + (near ? fmt::format("; write \"{}\"", *near) : ""));
}

bool has_load(const std::vector<Load>& loads, const std::string& id) {
  return std::any_of(loads.begin(), loads.end(), [&](const Load& l) { return l.id == id; });
}

void add_load(TableReader& reader, const Jig& jig, const Located<std::string>& name, std::vector<Load>& out) {
  if (name.value == "open") return;
  const Load* load = jig.load(name.value);
  if (load == nullptr) return unknown_load(reader, jig, name);
  if (has_load(out, load->id))
    return reader.fault(name.region, fmt::format("load \"{}\" is named twice", name.value), "name each load once");
  if (!jig.has(Role::load, load->id))
    return reader.fault(name.region, fmt::format("load \"{}\" has no relay on this jig", name.value),
                        fmt::format("add a relay with role = \"load\" and of = \"{}\" to the jig", name.value));
  out.push_back(*load);
}

std::vector<Load> read_loads(TableReader& reader, const StepContext& context) {
  std::vector<Load> out;
  const auto names = reader.need_texts("loads");
  if (context.jig == nullptr) return out;
  const auto before = reader.faults().count(Severity::fault);
  for (const auto& name : names) add_load(reader, *context.jig, name, out);
  if (!names.empty() && out.empty() && reader.faults().count(Severity::fault) == before)
    reader.fault(names.front().region, "\"loads\" names no load but open", "name at least one");
  return out;
}

/// Some of the loads named under `loads`.
std::vector<Load> read_some_loads(TableReader& reader, const StepContext& context, const char* key,
                                  const std::vector<Load>& loads) {
  std::vector<Load> out;
  const auto names = reader.texts(key);
  if (context.jig == nullptr) return out;
  for (const auto& name : names) {
    const bool on_jig = name.value == "open" || context.jig->load(name.value) != nullptr;
    if (on_jig && name.value != "open" && !has_load(loads, name.value))
      reader.fault(name.region, fmt::format("\"{}\": load \"{}\" is not among this step's loads", key, name.value),
                   fmt::format("add \"{}\" to loads, where it is proved and swept", name.value));
    else
      add_load(reader, *context.jig, name, out);
  }
  return out;
}

double read_positive(TableReader& reader, const char* key, Unit unit, double usual, Plausible plausible) {
  const auto value = reader.quantity(key, unit, plausible);
  if (!value) return usual;
  if (value->value > 0) return value->value;
  reader.fault(value->region, fmt::format("\"{}\" must be more than 0", key),
               fmt::format("write \"{}\", say", format_quantity(usual, unit)));
  return usual;
}

std::vector<double> read_levels(TableReader& reader, const StepContext& context, double gain) {
  const auto levels = reader.quantities("levels", Unit::volt);
  if (const Node* node = reader.node("levels"); node != nullptr && node->array() != nullptr && node->array()->empty())
    reader.fault(node->region, "\"levels\" is empty", "write [\"0 V\"], or leave the key out");
  std::vector<double> out;
  for (const auto& level : levels) {
    check_level(reader, context, level, gain);
    if (std::find(out.begin(), out.end(), level.value) != out.end())
      reader.fault(level.region, fmt::format("level {} is named twice", level_text(level.value)),
                   "name each level once");
    out.push_back(level.value);
  }
  if (!reader.has("levels")) out.push_back(0);
  return out;
}

StopRule read_stop(TableReader& reader, int readings) {
  const Node* node = reader.table("stable");
  if (node == nullptr) return Fixed{readings};
  TableReader table(*node, reader.about() + ": stable", reader.faults());
  if (reader.has("readings")) reader.fault(node->region, "has both \"readings\" and \"stable\"", "keep one of them");
  Stable rule;
  const auto window = table.integer("window", 2, 100);
  const auto most = table.integer("max", 2, 200);
  rule.window = window ? static_cast<int>(window->value) : 5;
  rule.tolerance = read_positive(table, "tolerance", Unit::volt, 50e-6, Plausible{1e-7, 0.1});
  rule.max = most ? static_cast<int>(most->value) : 40;
  if (rule.max < rule.window)
    table.fault(node->region, fmt::format("at most {} readings never fill a window of {}", rule.max, rule.window),
                "make max larger than window");
  table.finish();
  return rule;
}

/// Without its proof a load that never reached the pad looks like a load that changes nothing.
bool read_prove(TableReader& reader, const StepContext& context) {
  const auto prove = reader.boolean("prove");
  const auto reason = reader.text("prove_reason");
  if (!prove || prove->value) {
    need_role(reader, context, Role::tone_to_output);
    if (reason) reader.warning(reason->region, "\"prove_reason\" without prove = false", "leave it out");
    return true;
  }
  if (!reason || reason->value.empty())
    reader.fault(prove->region, "prove = false wants a reason", "add prove_reason = \"...\"");
  else
    reader.warning(prove->region, "the loads are not proved at the pad: a load that never reached it passes",
                   "remove prove = false where the jig has a tone");
  return false;
}

/// What the proof's arithmetic needs of the jig and the board.
void check_tone(TableReader& reader, const StepContext& context) {
  if (context.jig == nullptr || !context.jig->has(Role::tone_to_output)) return;
  const SourceFacts& source = context.jig->source;
  const bool known = source.tone_ohm > 0 && source.tone_low_Hz > 0 && source.tone_high_Hz >= source.tone_low_Hz;
  if (!known)
    reader.fault(reader.region(), "the jig's source has no tone that could prove a load",
                 "give tone_resistance, tone_low and tone_high in the jig's [source]");
  else if (!(context.board.unpowered_ohm > 0))
    reader.fault(reader.region(), "the board's unpowered_resistance is not known", "give it in [board]");
}

void read_sweep(TableReader& reader, const StepContext& context, UnderLoadKeys& keys) {
  keys.loads = read_loads(reader, context);
  keys.short_loads = read_some_loads(reader, context, "short_loads", keys.loads);
  if (keys.short_loads.empty()) keys.short_loads = keys.loads;
  keys.power_up_loads = read_some_loads(reader, context, "power_up_loads", keys.loads);
  keys.levels_V = read_levels(reader, context, keys.range.gain);
  const auto every = reader.integer("bracket_every", 0, 1000);
  keys.bracket_every = every ? static_cast<int>(every->value) : 0;
}

void read_times(TableReader& reader, UnderLoadKeys& keys) {
  keys.detector_dwell_s = read_positive(reader, "detector_dwell", Unit::second, 2e-3, Plausible{1e-5, 1});
  keys.return_after_s = read_positive(reader, "return_after", Unit::second, 0.2, Plausible{1e-3, 60});
  keys.settle_to_V = read_positive(reader, "settle_to", Unit::volt, 10e-6, Plausible{1e-7, 0.1});
}

void read_proof(TableReader& reader, const StepContext& context, UnderLoadKeys& keys) {
  keys.prove = read_prove(reader, context);
  if (keys.prove) check_tone(reader, context);
  keys.proof_tolerance = read_positive(reader, "proof_tolerance", Unit::ratio, 0.3, Plausible{0.01, 0.5});
}

void need_roles(TableReader& reader, const StepContext& context, const UnderLoadKeys& keys) {
  for (const Role role : {Role::meter_to_output, Role::detector_to_output, Role::supply_to_board})
    need_role(reader, context, role);
  const auto is_zero = [](double v) { return v == 0; };
  const auto& levels = keys.levels_V;
  const bool zero = std::any_of(levels.begin(), levels.end(), is_zero) || !keys.power_up_loads.empty();
  if (zero) need_role(reader, context, Role::input_short);
  if (!std::all_of(levels.begin(), levels.end(), is_zero)) need_role(reader, context, Role::source_to_input);
}

}  // namespace

std::unique_ptr<Step> read_offset_under_load(TableReader& reader, const StepContext& context) {
  const CleanRead clean(reader, context);
  auto step = std::make_unique<UnderLoadStep>();
  UnderLoadKeys keys;
  const auto name = reader.need_text("range");
  if (!name.value.empty())
    if (const auto range = find_range(reader, context, name)) keys.range = *range;
  read_sweep(reader, context, keys);
  keys.use = read_meter_use(reader, context, 10);
  keys.stop = read_stop(reader, keys.use.readings);
  read_times(reader, keys);
  read_proof(reader, context, keys);
  need_roles(reader, context, keys);
  if (clean.ok() && keys.range.gain != 0) step->lay_out(context, keys);
  return step;
}

}  // namespace jigwright
