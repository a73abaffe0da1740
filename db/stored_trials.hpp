// Ended trials as they were stored, for whoever works them out again. Each call is one short transaction. One thread.
#pragma once
#include <cstdint>
#include <string>
#include <utility>
#include <vector>

#include "db/trial_record.hpp"

namespace jigwright {

class Database;

struct StoredFinding {
  MetricName name;
  Judged judged;  ///< its margin is not stored
};

struct StoredTrial {
  std::int64_t id{};
  std::string serial;
  int attempt{};
  Judgement judgement{Judgement::void_};
  std::string void_reason, unsafe;
  std::int64_t setup{};   ///< whose documents judged it
  int readings_format{};  ///< 0 = its raw readings are gone
  std::string readings;
  std::vector<StoredFinding> findings;
  std::vector<std::pair<std::string, int>> reduce_versions;
};

/// Ended trials with an id above `after`, by id, at most `most`. Error kind store.
Result<std::vector<StoredTrial>> stored_trials(Database& database, std::int64_t after, int most);

/// Plan, jig, limits and whatever else stood with the trials of a set-up. Error kind store.
Result<std::vector<Document>> documents_of_setup(Database& database, std::int64_t setup);

}  // namespace jigwright
