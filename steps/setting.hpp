// A setting: one state of relays, supply, source and meter, with the readings taken there. Plain data, made by
// expand(), played by the sequencer, stored with its readings, and read again by reduce(). Any thread.
#pragma once
#include <cstdint>
#include <span>
#include <string>
#include <variant>
#include <vector>

#include "base/quantity.hpp"
#include "fixtures/instruments.hpp"

namespace jigwright {

/// A trial runs through these in order, whatever the order of steps in the plan; in a phase, steps keep the plan's
/// order. Contact is proved before anything else; what is proved without power comes before power.
enum class Phase : std::uint8_t { contact = 0, unpowered = 1, powered = 2 };

/// Takes a fixed number of readings.
struct Fixed {
  int n{1};
  bool operator==(const Fixed&) const = default;
};
/// Takes readings until the last `window` of them lie within `tolerance` (largest less smallest), at most `max`.
struct Stable {
  int window{5};
  double tolerance{};
  int max{50};
  bool operator==(const Stable&) const = default;
};
using StopRule = std::variant<Fixed, Stable>;

enum class Next : std::uint8_t { more = 0, enough = 1, gave_up = 2 };  // stored; never renumbered

/// Whether to take another reading. Pure, and used by player and replay alike: both must reach the same count.
/// gave_up = `max` readings and not stable, or a reading that no later one mends (missing, refused, stale, no number).
/// An overload ends a setting at once (enough: the finding says over range).
Next decide(const StopRule& rule, std::span<const Reading> readings);

/// Readings of the largest count that the rule allows.
int most_readings(const StopRule& rule);

struct ReadMeter {
  MeterSetup setup;
};
struct ReadSupply {
  SupplyQuantity quantity{};
};
struct ReadDetector {
  double dwell_s{};
};
/// A question to the operator: yes (1) or no (0), or a value within bounds.
struct Ask {
  std::string step;  ///< the step's id: the name under which an answer comes
  std::string question;
  bool yes_no{true};
  double low{}, high{};
  Unit unit{Unit::count};
};
/// Waits with everything as set; takes one reading of nothing (value 0, ok) so that the record shows it.
struct Dwell {};
using Act = std::variant<ReadMeter, ReadSupply, ReadDetector, Ask, Dwell>;

/// Instruments that a setting needs for itself, as bits; the player leases them.
enum Resource : std::uint32_t { use_meter = 1, use_source = 2, use_detector = 4, use_supply = 8, use_person = 16 };

struct Setting {
  std::string id;     ///< "under-load/100 pF/+5 V/dc": canonical within the plan, stable when variants are added
  std::string shown;  ///< for the progress line: "100 pF at +5 V"
  int step{};         ///< index of the step in the plan
  /// Place in its step's Expansion::settings (arrange() may change the order in which settings are played): set by
  /// expand(), and what reduce() looks up by. -1 = added by the sequencer (a known value), not the step's.
  int position{-1};
  Phase phase{Phase::powered};
  int group{};   ///< barriers within a step and phase: arrange() permutes only inside one; -1 keeps its place
  RelaySet own;  ///< the nest's own relays (loads, ranges, shorts, supply)
  RelaySet bus;  ///< relays that join the nest to shared instruments (meter, source, detector)
  SupplyState supply;
  SourceState source;
  double settle_s{};  ///< after the last relay is done and source and supply have settled
  Act act;
  StopRule stop;
  std::uint32_t resources{};
  bool only_if_doubtful{
      false};        ///< a known value, read only if the step's earlier settings overloaded or never settled
  double worst_s{};  ///< longest physical time of settle and readings; filled by expand()
  double usual_s{};  ///< likewise for the usual number of readings; filled by expand()
  bool needs_lid{true};
};

struct SettingRecord {
  int setting{-1};     ///< index in the trial's list of settings
  Duration started{};  ///< when its settling began
  std::vector<Reading> readings;
  Next ended{Next::gave_up};
};

}  // namespace jigwright
