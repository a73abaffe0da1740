// Kind "load-check": each load of the jig at the pad of a sound board without power, and its relay both ways.
//
// `capacitance`  by the tone's level (tone_proof.hpp), with Rp by the meter in ohm, less what the open output has
// `released`     what still stands at the pad with all loads released again, beyond the jig's stray: put down to the
//                largest load that it fits, the rest to the next; a smaller one behind a larger one is not seen
// `stray`        what stands there before any load was closed
// `leakage`      resistance beside the load, by the meter in ohm on the output with the load and without it: at least
//                1 / (1/R - 1/R0 + 2u), R0 the open output's
// `series`       resistance in series, of loads whose reactance at the highest tone is at most most_reactance_ohm: the
//                pad's impedance |Z| = R V / V0 at a tone of loud_tone_V (R, the tone's path, far above |Z|),
//                less the reactance: sqrt(|Z|^2 - (1/wC)^2). Our own derivation, from the divider. Of smaller loads no
//                level here tells a few ohm.
//
// A capacitor can't be charged, cut off, and read again after a wait on this kind of jig: the source is at rest before
// its relay opens, and empties the load through the tone's resistor; a released load lies on its bleed resistor. So the
// leakage is read as a resistance, after the settling of R0 and C.
//
// Keys: least_leakage ("10 Mohm"); most_series ("3 ohm", beyond what jig.toml declares); readings (4, of the meter);
// integration_cycles (1).
//
// Own bounds of `capacitance`: jig.toml's tolerance and the expanded uncertainty (k = 2) that the tone has at the
// declared value; a load outside is off for certain. `released`: fits_share of the load's capacitance.
#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <limits>
#include <numbers>
#include <numeric>

#include "steps/common.hpp"
#include "steps/kinds.hpp"
#include "steps/tone_proof.hpp"

namespace jigwright {
namespace {

/// Below a diode's threshold: no junction of the unpowered board conducts.
constexpr double tone_V = 0.2;
/// Above it, but the load that is read holds the pad at a few millivolts; without it the tone's resistor limits the
/// current into the board's output to a fifth of a milliampere.
constexpr double loud_tone_V = 2;
/// The louder tone is taken where the other one's level is below so many times the detector's floor.
constexpr double quiet_floors = 20;
/// Tones keep this far above the lower end of the detector's band: there 1/20 of a first-order end loses 0.1 %.
constexpr double above_band = 20;
constexpr double most_reactance_ohm = 10;
constexpr double tone_settle_taus = 5, tone_periods = 3;
/// For a resistance beside a capacitor: e^-14 is 1 ppm.
constexpr double ohm_settle_taus = 14;
constexpr double least_dwell_s = 2e-3;
/// The open output may show half as much again as the stray capacitance that the jig declares.
constexpr double open_room = 1.5;
/// What remains is a load's when it is at least this share of it; within rest_share of it nothing else is left.
constexpr double fits_share = 0.6, rest_share = 0.15;
/// A load of less than so many times what hangs on the open output already can't be told.
constexpr double hidden_times = 5;
constexpr double nan = std::numeric_limits<double>::quiet_NaN();

struct LoadCheckKeys {
  double least_leakage_ohm{}, most_series_ohm{};
  MeterUse use;
};

/// The open output at three tones: one of them suits whatever hangs there.
struct OpenRead {
  std::vector<int> tones;
};

struct LoadRead {
  Load load;
  double frequency_Hz{}, tone_V{};
  int tone{-1}, ohm{-1}, series{-1};
  int capacitance{-1}, released{-1}, leakage{-1}, series_metric{-1};
};

struct Sweep {
  Layout layout;
  std::vector<double> open_Hz;
  OpenRead before, after;
  int open_ohm{-1}, stray{-1};
  std::vector<LoadRead> loads;
};

/// The tone's path: its own resistor and the source's.
ToneFacts tone_facts(const Jig& jig) {
  return {tone_V, jig.source.tone_ohm + jig.source.output_ohm, jig.detector.of_reading, jig.source.tone_of_setting,
          jig.detector.floor_V};
}

/// As if the tone were the usual one: level and floor in its scale.
ToneFacts scaled(ToneFacts facts, double level_V) {
  facts.floor_V *= tone_V / level_V;
  return facts;
}

class SweepMaker {
 public:
  SweepMaker(const StepContext& context, const LoadCheckKeys& keys)
      : context_(context), jig_(*context.jig), keys_(keys), ohm_range_(jig_.resistance_range(R0())) {
    sweep_.layout = Layout(context);
  }

  Sweep make() {
    sweep_.open_Hz = {low_Hz(), std::sqrt(low_Hz() * high_Hz()), high_Hz()};
    for (const Load& load : jig_.loads)
      if (jig_.has(Role::load, load.id)) sweep_.loads.push_back({load});
    sweep_.before = add_open("before");
    sweep_.open_ohm = add_ohm("ohm/open", nullptr);
    for (LoadRead& read : sweep_.loads) add_load(read);
    sweep_.after = add_open("after");
    for (LoadRead& read : sweep_.loads) add_released(read);
    sweep_.stray = sweep_.layout.nominal(
        sweep_.layout.metric("stray", "", Unit::farad, About::jig, 0.0, open_room * open_F()), open_F());
    for (LoadRead& read : sweep_.loads) add_metrics(read);
    return std::move(sweep_);
  }

 private:
  double R0() const { return context_.board.unpowered_ohm; }
  double parallel_ohm() const { return parallel(facts().tone_ohm, R0()); }
  double high_Hz() const { return jig_.source.tone_high_Hz; }
  double low_Hz() const {
    return std::min(std::max(jig_.source.tone_low_Hz, above_band * jig_.detector.low_Hz), high_Hz());
  }
  double open_F() const { return jig_.stray_F + jig_.detector.input_F; }
  double largest_F() const {
    double most_F = 0;
    for (const Load& load : jig_.loads) most_F = std::max(most_F, load.capacitance_F);
    return most_F;
  }
  ToneFacts facts() const { return tone_facts(jig_); }

  /// Settles for the largest load, should its relay be welded.
  OpenRead add_open(const std::string& when) {
    OpenRead read;
    for (const double f_Hz : sweep_.open_Hz) {
      Setting s = tone("open/" + when + "/" + format_quantity(f_Hz, Unit::hertz), "open output", nullptr, tone_V, f_Hz);
      s.settle_s += tone_settle_taus * parallel_ohm() * largest_F();
      read.tones.push_back(sweep_.layout.add(std::move(s)));
    }
    ++group_;
    return read;
  }

  void add_load(LoadRead& read) {
    const double total_F = read.load.capacitance_F + open_F();
    const bool loud = loud_tone_V <= jig_.source.max_V;
    read.frequency_Hz = tone_frequency(parallel_ohm(), total_F, low_Hz(), high_Hz());
    const double level_V = tone_level(facts(), parallel_ohm(), total_F, read.frequency_Hz);
    read.tone_V = loud && level_V < quiet_floors * jig_.detector.floor_V ? loud_tone_V : tone_V;
    const std::string& id = read.load.id;
    read.tone = sweep_.layout.add(tone("tone/" + id, id, &read.load, read.tone_V, read.frequency_Hz));
    read.ohm = add_ohm("ohm/" + id, &read.load);
    if (loud && 1 / (2 * std::numbers::pi * high_Hz() * read.load.capacitance_F) <= most_reactance_ohm)
      read.series = sweep_.layout.add(tone("series/" + id, "series of " + id, &read.load, loud_tone_V, high_Hz()));
    ++group_;
  }

  Setting tone(std::string id, std::string shown, const Load* load, double level_V, double frequency_Hz) const {
    Setting s = unpowered_setting(context_, std::move(id), "tone, " + shown);
    s.group = group_;
    if (load != nullptr) join(s, jig_, Role::load, load->id);
    join(s, jig_, Role::tone_to_output);
    join(s, jig_, Role::detector_to_output);
    s.source = {0, level_V, frequency_Hz};
    const double total_F = open_F() + (load != nullptr ? load->capacitance_F : 0);
    s.settle_s += tone_settle_taus * parallel_ohm() * total_F;
    s.act = ReadDetector{std::max(least_dwell_s, tone_periods / frequency_Hz)};
    return s;
  }

  int add_ohm(std::string id, const Load* load) {
    Setting s = unpowered_setting(context_, std::move(id), load == nullptr ? "open output" : "leakage of " + load->id);
    s.group = group_;
    if (load != nullptr) join(s, jig_, Role::load, load->id);
    join(s, jig_, Role::meter_to_output);
    s.settle_s += ohm_settle_taus * R0() * (open_F() + jig_.meter.input_F + (load ? load->capacitance_F : largest_F()));
    s.act = keys_.use.on(ohm_range_, MeterFunction::resistance);
    s.stop = Fixed{keys_.use.readings};
    return sweep_.layout.add(std::move(s));
  }

  std::string variant(const Load& load) const {
    for (const Relay& r : jig_.relays)
      if (r.role == Role::load && r.of == load.id) return relay_in_words(r);
    return load.id;
  }

  void add_released(LoadRead& read) {
    const double most_F = fits_share * read.load.capacitance_F;
    read.released = sweep_.layout.nominal(
        sweep_.layout.metric("released", variant(read.load), Unit::farad, About::jig, std::nullopt, most_F), 0);
  }

  void add_metrics(LoadRead& read) {
    const Load& load = read.load;
    const std::string name = variant(load);
    const double room_F = load.tolerance * load.capacitance_F + 2 * tone_u(read);
    read.capacitance =
        sweep_.layout.nominal(sweep_.layout.metric("capacitance", name, Unit::farad, About::jig,
                                                   load.capacitance_F - room_F, load.capacitance_F + room_F),
                              load.capacitance_F);
    read.leakage = sweep_.layout.metric("leakage", name, Unit::ohm, About::jig, keys_.least_leakage_ohm, std::nullopt);
    if (read.series < 0) return;
    read.series_metric = sweep_.layout.metric("series", name, Unit::ohm, About::jig, std::nullopt,
                                              load.series_ohm + jig_.line_ohm + keys_.most_series_ohm);
  }

  /// What the tone's finding of a sound load states.
  double tone_u(const LoadRead& read) const {
    const ToneBase base = tone_base(facts(), tone_level(facts(), parallel_ohm(), 0, sweep_.open_Hz.front()));
    const auto of = [&](const ToneFacts& at, double F, double f_Hz) {
      return tone_capacitance(at, base, tone_level(facts(), parallel_ohm(), F, f_Hz), f_Hz).u_F;
    };
    return Combined()
        .add(of(scaled(facts(), read.tone_V), read.load.capacitance_F + open_F(), read.frequency_Hz))
        .add(of(facts(), open_F(), sweep_.open_Hz.back()))
        .u();
  }

  const StepContext& context_;
  const Jig& jig_;
  const LoadCheckKeys& keys_;
  Accuracy ohm_range_;
  Sweep sweep_;
  int group_{0};
};

class LoadCheckStep final : public Step {
 public:
  void lay_out(const StepContext& context, const LoadCheckKeys& keys) {
    const Jig& jig = *context.jig;
    use_ = keys.use;
    ohm_range_ = jig.resistance_range(context.board.unpowered_ohm);
    tone_ = tone_facts(jig);
    high_Hz_ = jig.source.tone_high_Hz;
    open_F_ = jig.stray_F + jig.detector.input_F;
    sweep_ = SweepMaker(context, keys).make();
  }

  bool empty() const { return sweep_.loads.empty(); }

  Expansion expand(Depth) const override { return sweep_.layout.named(id); }

  std::vector<Finding> reduce(Depth, std::span<const SettingRecord> records,
                              std::span<const Setting> settings) const override {
    const Records played(records, settings, sweep_.layout.settings());
    std::vector<Finding> out;
    const auto base = base_of(played);
    if (!base) return out;
    const auto before = open_of(sweep_.before, played, *base);
    if (const auto after = open_of(sweep_.after, played, *base)) reduce_released(*after, out);
    if (!before) return out;
    out.push_back(found(sweep_.stray, before->state, before->C.value_F, before->C.u_F, before->n));
    for (const LoadRead& read : sweep_.loads) reduce_load(read, *base, *before, played, out);
    return out;
  }

 private:
  struct Base {
    ToneBase tone;
    FindingState state{};
    Sample ohm;
  };
  struct Open {
    Capacitance C;
    FindingState state{};
    int n{};
  };

  /// Rp by the meter in ohm. The level at the lowest tone stands for the tone and the detector, whose errors then
  /// cancel; where a large load hangs on the open output already, the level is worked out from Rp.
  std::optional<Base> base_of(const Records& played) const {
    const auto low = played.sample(sweep_.before.tones.front());
    const auto ohm = played.sample(sweep_.open_ohm);
    if (!low || !ohm) return std::nullopt;
    Base base{{}, worse(low->state, ohm->state), *ohm};
    const double parallel_ohm = parallel(tone_.tone_ohm, std::max(ohm->mean, 1.0));
    const double level_V = tone_level(tone_, parallel_ohm, 0, 0);
    const bool held_down = low->mean < (1 - rest_share) * level_V;
    base.tone = tone_base(tone_, held_down ? level_V : low->mean);
    base.tone.parallel_ohm = parallel_ohm;
    return base;
  }

  /// By the tone at which 1/wC is nearest to Rp.
  std::optional<Open> open_of(const OpenRead& read, const Records& played, const Base& base) const {
    Open out{{nan, nan}, base.state, 0};
    double best = std::numeric_limits<double>::infinity();
    for (std::size_t i = 0; i < read.tones.size(); ++i) {
      const auto level = played.sample(read.tones[i]);
      if (!level) return std::nullopt;
      out.state = worse(out.state, level->state);
      out.n += level->n;
      const Capacitance C = tone_capacitance(tone_, base.tone, level->mean, sweep_.open_Hz[i]);
      const double off = C.value_F > 0 ? C.u_F / C.value_F : std::numeric_limits<double>::infinity();
      const bool last = i + 1 == read.tones.size() && !std::isfinite(out.C.value_F);
      if (off < best || last) {
        best = off;
        out.C = C;
      }
    }
    return out;
  }

  /// The largest load first.
  void reduce_released(const Open& open, std::vector<Finding>& out) const {
    std::vector<std::size_t> order(sweep_.loads.size());
    std::iota(order.begin(), order.end(), std::size_t{0});
    std::sort(order.begin(), order.end(), [&](std::size_t a, std::size_t b) {
      return sweep_.loads[a].load.capacitance_F > sweep_.loads[b].load.capacitance_F;
    });
    double left_F = std::max(open.C.value_F - open_F_, 0.0);
    for (const std::size_t i : order) {
      const LoadRead& read = sweep_.loads[i];
      const double C = read.load.capacitance_F;
      out.push_back(found(read.released, open.state, left_F, open.C.u_F, open.n));
      if (left_F > fits_share * C) left_F = std::abs(left_F - C) < rest_share * C ? 0 : std::max(left_F - C, 0.0);
    }
  }

  void reduce_load(const LoadRead& read, const Base& base, const Open& open, const Records& played,
                   std::vector<Finding>& out) const {
    const bool hidden = open.state == FindingState::measured && open.C.value_F > open_room * open_F_ &&
                        open.C.value_F * hidden_times > read.load.capacitance_F;
    if (const auto tone = played.sample(read.tone)) {
      const auto all =
          tone_capacitance(scaled(tone_, read.tone_V), base.tone, tone->mean * tone_V / read.tone_V, read.frequency_Hz);
      const FindingState state = hidden ? FindingState::no_data : worse(open.state, tone->state);
      out.push_back(found(read.capacitance, worse(state, worse(open.state, tone->state)), all.value_F - open.C.value_F,
                          Combined().add(all.u_F).add(open.C.u_F).u(), tone->n + open.n));
    }
    if (const auto ohm = played.sample(read.ohm)) out.push_back(leakage(read, base, *ohm));
    if (const auto tone = played.sample(read.series)) out.push_back(series(read, *tone));
  }

  double random_ohm(const Sample& s) const {
    return Combined().add(scatter(s.sd, s.n, use_.noise(ohm_range_))).add(rounding(ohm_range_.resolution)).u();
  }

  /// "At least": no uncertainty of its own. The meter's errors are in both readings alike.
  Finding leakage(const LoadRead& read, const Base& base, const Sample& with) const {
    const double R = with.mean, R0 = base.ohm.mean;
    const double u = Combined()
                         .add(random_ohm(with), 1 / (R * R))
                         .add(random_ohm(base.ohm), 1 / (R0 * R0))
                         .add(specified_difference(ohm_range_, R - R0), 1 / (R * R))
                         .u();
    const double S = std::max(1 / R - 1 / R0, 0.0) + 2 * u;
    return found(read.leakage, worse(base.ohm.state, with.state), R > 0 && R0 > 0 ? 1 / S : nan, nan,
                 with.n + base.ohm.n);
  }

  Finding series(const LoadRead& read, const Sample& tone) const {
    const double per_V = tone_.tone_ohm / loud_tone_V;
    const double Z = tone.mean * per_V;
    const double X = 1 / (2 * std::numbers::pi * high_Hz_ * read.load.capacitance_F);
    const double R = std::sqrt(std::max(Z * Z - X * X, 0.0));
    const double Z_u = Combined()
                           .add(rectangular(tone_.of_level), Z)
                           .add(rectangular(tone_.of_setting), Z)
                           .add(rectangular(tone_.floor_V), per_V)
                           .u();
    const double X_u = rectangular(read.load.tolerance) * X;
    const double square_u = Combined().add(Z_u, 2 * Z).add(X_u, 2 * X).u();
    const double u = R > 0 ? std::min(square_u / (2 * R), std::sqrt(square_u)) : std::sqrt(square_u);
    return found(read.series_metric, tone.state, R, u, tone.n);
  }

  MeterUse use_;
  Accuracy ohm_range_;
  ToneFacts tone_;
  double high_Hz_{}, open_F_{};
  Sweep sweep_;
};

double read_ohm(TableReader& reader, const char* key, Plausible usual, double silent_ohm) {
  return reader.has(key) ? reader.need_positive(key, Unit::ohm, usual).value : silent_ohm;
}

}  // namespace

std::unique_ptr<Step> read_load_check(TableReader& reader, const StepContext& context) {
  const CleanRead clean(reader, context);
  auto step = std::make_unique<LoadCheckStep>();
  for (const Role role : {Role::tone_to_output, Role::detector_to_output, Role::meter_to_output, Role::bleed})
    need_role(reader, context, role);
  LoadCheckKeys keys;
  keys.least_leakage_ohm = read_ohm(reader, "least_leakage", {100e3, 100e9}, 10e6);
  keys.most_series_ohm = read_ohm(reader, "most_series", {0.1, 100}, 3);
  keys.use = read_meter_use(reader, context, 4);
  if (!clean.ok()) return step;
  step->lay_out(context, keys);
  if (step->empty()) reader.fault(reader.region(), "the jig has no load with a relay", "take the step out");
  return step;
}

}  // namespace jigwright
