// A trial as the copy of its record holds it, ready to be written again. Pure; any thread.
#pragma once
#include <optional>
#include <string>

#include "db/bodies.hpp"
#include "db/record_copy.hpp"
#include "db/uuid.hpp"

namespace jigwright {

struct TrialCopy {
  Uuid uuid{};
  std::string station_uuid;  ///< bytes, like the next
  std::string revision_uuid;
  std::optional<std::string> revision_document;  ///< SHA-256
  TrialStart start;
  int attempt{};
  TrialState state{TrialState::ended};
  TrialEnd end;
  int missed{};
  int worst{-1};  ///< index into end.findings, as Outcome::deciding is
  std::optional<double> worst_margin;
  std::string archived_sha256;  ///< of raw readings that were archived away; empty = they are in `end`, or never were
};

/// nullopt when the body is not one, or names a part or a document that the copies lack.
std::optional<TrialCopy> trial_copy(const RecordCopy& record, const CopySet& copies);

}  // namespace jigwright
