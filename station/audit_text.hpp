// An audit's page and the log as a person or a program reads them: plain sentences and aligned lines, or one JSON
// document. Pure text; any thread.
#pragma once
#include <string>
#include <vector>

#include "db/audit.hpp"
#include "db/journal.hpp"

namespace jigwright {

/// What was checked, what differs, the first record that does, and the head of each chain to note elsewhere.
std::string render(const AuditReport& report, const std::string& store, bool json);

/// A line a record, newest last: when, who, what, on which board or file, and its place in the chain.
std::string render(const std::vector<LogLine>& log, bool json);

}  // namespace jigwright
