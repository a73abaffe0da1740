// What the kinds of steps share: closing relays by role, laying out settings and metrics, looking records up, and
// reading the keys that several kinds have. Pure but for the faults that go to a reader; any thread.
#pragma once
#include <memory>
#include <optional>
#include <span>
#include <string>
#include <string_view>
#include <vector>

#include "steps/step.hpp"
#include "steps/uncertainty.hpp"

namespace jigwright {

// --- expand ---------------------------------------------------------------------------------------------------------

/// Whether relays of this role join the nest to an instrument that nests share.
bool joins_shared(Role role);

/// Closes the relays of a role in a setting, and leases the shared instrument that they join.
void join(Setting& setting, const Jig& jig, Role role, std::string_view of = {});

/// A setting without power. Nothing is closed; it settles for the board's own time.
Setting unpowered_setting(const StepContext& context, std::string id, std::string shown);

/// A setting with the board supplied as its facts say. The caller chooses what the input sees.
Setting powered_setting(const StepContext& context, std::string id, std::string shown);

/// "K12, meter to input", "K27, load 1 nF": a relay in a metric's variant.
std::string relay_in_words(const Relay& relay);

/// Closes the input short, where the jig has one.
void short_input(Setting& setting, const Jig& jig);

/// Settings and metrics of a step, as they are made; positions and times are filled in here.
class Layout {
 public:
  Layout() = default;
  explicit Layout(const StepContext& context) : jig_(context.jig), step_(context.index) {}

  /// @return its position
  int add(Setting setting);
  /// @return its index
  int metric(std::string name, std::string variant, Unit unit, About about);
  /// With bounds of the step's own.
  int metric(std::string name, std::string variant, Unit unit, About about, std::optional<double> low,
             std::optional<double> high);
  /// What a sound board or jig has: the margin is measured from there where the limit set does not tell.
  int nominal(int metric, double value);

  std::size_t settings() const { return expansion_.settings.size(); }
  std::size_t metrics() const { return expansion_.metrics.size(); }
  /// With the step's id before every setting's id and in every metric's name.
  Expansion named(const std::string& step_id) const;

 private:
  double reading_s(const Act& act) const;
  std::shared_ptr<const Jig> jig_;
  int step_{0};
  Expansion expansion_;
};

// --- reduce ---------------------------------------------------------------------------------------------------------

/// The readings of one setting, taken together. Unless `state` is measured, only `state` says anything.
struct Sample {
  FindingState state{FindingState::no_data};
  double mean{};
  double sd{};  ///< n-1 in the denominator; 0 for one reading
  int n{};
  double at_s{};  ///< mean time of the readings that count
};

/// Of the readings, all (Fixed) or the last window (Stable). An overload makes it over_range; a reading that is
/// missing, refused, stale or no number, or too few of them, no_data; a stop rule that gave up, not_settled.
Sample take(const SettingRecord& record, const StopRule& rule);

/// Records of one step by position.
class Records {
 public:
  Records(std::span<const SettingRecord> records, std::span<const Setting> settings, std::size_t positions);
  /// nullopt when the setting was not played.
  std::optional<Sample> sample(int position) const;

 private:
  std::span<const Setting> settings_;
  std::vector<const SettingRecord*> by_position_;
};

/// The worse of two states: no data before never settled before over range before measured.
inline FindingState worse(FindingState a, FindingState b) {
  return a > b ? a : b;
}

/// A finding; a value that is no number makes it no_data, and only a measured one carries value and uncertainty.
Finding found(int metric, FindingState state, double value, double u, int n);

// --- read -----------------------------------------------------------------------------------------------------------

/// Whether a step's keys were read without a fault, and there is a jig to lay it out on.
class CleanRead {
 public:
  CleanRead(TableReader& reader, const StepContext& context)
      : reader_(&reader), context_(&context), before_(reader.faults().count(Severity::fault)) {}
  bool ok() const;

 private:
  TableReader* reader_;
  const StepContext* context_;
  std::size_t before_;
};

/// A fault unless the jig has a relay of this role.
void need_role(TableReader& reader, const StepContext& context, Role role);

/// How the meter reads: keys `readings` and `integration_cycles`.
struct MeterUse {
  int readings{1};
  double cycles{1};        ///< of the mains
  double integration_s{};  ///< of one reading
  ReadMeter on(const Accuracy& range, MeterFunction function = MeterFunction::dc_voltage) const {
    return {{function, range.range, integration_s}};
  }
  /// Stated noise of one reading: the range's figure is for one cycle and falls with the root of the aperture.
  double noise(const Accuracy& range) const { return range.noise / std::sqrt(cycles); }
};
MeterUse read_meter_use(TableReader& reader, const StepContext& context, int usual_readings);

/// Key `ranges`: some of the board's, all of them when absent. Unknown or doubled ones are faults.
std::vector<BoardFacts::Range> read_ranges(TableReader& reader, const StepContext& context);
/// One range of the board by name; a fault at the name's place if the board has none such.
std::optional<BoardFacts::Range> find_range(TableReader& reader, const StepContext& context,
                                            const Located<std::string>& name);

/// A fault where an output level is beyond the board's swing, or beyond the source through this gain.
void check_level(TableReader& reader, const StepContext& context, const Located<double>& level_V, double gain);

/// "0 V", "+5 V", "-5 V".
std::string level_text(double level_V);

}  // namespace jigwright
