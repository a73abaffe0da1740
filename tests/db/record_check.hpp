// What the tests of the store under faults ask of it afterwards: each trial that was begun is nothing, an open VOID or
// whole, and the file is sound.
#pragma once
#include <map>
#include <string>

#include "db/store.hpp"
#include "tests/db/factory.hpp"

namespace jigwright::room {

enum class Kept { nothing, open, whole };

/// What the store holds of the trials, by uuid. Everything that is not plainly one of the three goes to `complaints`:
/// a half record, a value that differs, findings or readings without an ended trial, a board without its one speaking
/// trial, SQLite's own check and, on request, an audit of the chain (slow).
struct Held {
  std::map<std::string, Kept> trials;
  std::string complaints;
  Kept of(const OpenTrial& open) const {
    const auto found = trials.find(text(open.uuid));
    return found == trials.end() ? Kept::nothing : found->second;
  }
};

/// Serials must be the factory's, each trial of a board its trial of the factory.
Held held(Store& store, const Factory& factory, bool audited = false);

}  // namespace jigwright::room
