// What a trial leaves in the store: plain records that the sequencer fills and db/ writes. No SQL here. Any thread.
#pragma once
#include <array>
#include <cstdint>
#include <optional>
#include <string>
#include <vector>

#include "base/finding.hpp"
#include "limits/judge.hpp"

namespace jigwright {

/// Where a result comes from. Stored; never renumbered. Simulated and measured trials don't share a store.
enum class Origin : std::uint8_t { measured = 0, simulated = 1, taken = 2 };

/// What a trial is for. Stored; never renumbered. Only boards of orders are counted in yields and questions.
enum class Purpose : std::uint8_t { board = 0, jig_check = 1, reference_board = 2, reject_sample = 3 };

/// A file that judged: its kind ("plan", "jig", "limits", "dialect") and full text. Kept once by its SHA-256.
struct Document {
  std::string kind;
  std::string name;  ///< as the user named it, for messages only
  std::string text;
};

struct InstrumentIdentity {
  std::string instrument, maker, model, serial, firmware;
};

/// Known when the trial begins; written at once as an open VOID, so that a killed trial shows.
struct TrialStart {
  std::string serial;
  std::string order;    ///< empty = no known order
  std::string station;  ///< the station's name
  int nest{1};
  std::int64_t at_us{};  ///< UTC, microseconds since 1970
  Origin origin{Origin::measured};
  Purpose purpose{Purpose::board};
  std::string operator_name;        ///< empty = not logged in
  std::string program;              ///< name and version
  std::string depth;                ///< "full" or "short", and why
  std::vector<Document> documents;  ///< plan, jig, limits, dialects, scenario
  std::string plan;                 ///< the plan's id
  std::string limit_set;            ///< the limit set's id
  std::int64_t limit_revision{};
  /// Number of the adopted revision in force; 0 = played with other files; empty = none is in force. The store says.
  std::optional<std::int64_t> adopted;
};

/// One metric of the trial: its name, limit and what was found.
struct FindingRow {
  Metric metric;
  std::optional<Limit> limit;  ///< empty = recorded only
  Judged judged;
};

struct TrialEnd {
  /// UTC at the end, for the journal; 0 = the start's and took_ms. Virtual time makes them differ.
  std::int64_t at_us{};
  std::int64_t took_ms{};
  Outcome outcome;  ///< `deciding` is an index into `findings`
  std::vector<FindingRow> findings;
  std::vector<InstrumentIdentity> instruments;
  std::vector<std::pair<std::string, int>> reduce_versions;  ///< step kind -> version
  std::optional<double> ambient_C;
  std::string safe_state;  ///< empty = confirmed; else what is unconfirmed
  int readings_format{1};  ///< how `readings` is laid out (sequencer/raw_readings.hpp)
  std::string readings;    ///< bytes
};

}  // namespace jigwright
