// The canonical bodies of records, read back from the rows that hold them: whoever writes a record takes its body's
// hash from here, and an audit does so again, so a row that has changed since shows. Names and contents go in, integer
// keys do not; docs/store.md lays a body out field by field. What many trials share goes in as its own hash, which is
// remembered. db/'s own; one thread, inside a transaction.
#pragma once
#include <cstdint>
#include <functional>
#include <map>
#include <optional>
#include <string>
#include <unordered_map>
#include <vector>

#include "db/digest.hpp"
#include "db/sqlite.hpp"
#include "limits/limit.hpp"

namespace jigwright {

/// A trial's rows as a body found them.
struct TrialBody {
  std::int64_t id{};
  std::int64_t station{};
  std::string serial;
  bool open{};                          ///< as its row says: no end yet
  bool pristine{};                      ///< every column that only an end fills in is as begin left it
  std::string sha256;                   ///< of the body
  std::int64_t findings{}, readings{};  ///< rows; of an end's body only
  std::string misfit;  ///< a derived column that disagrees with the findings; empty = none; checked on request
};

class Bodies {
 public:
  explicit Bodies(Database& database) : db_(database) {}

  /// A finding's row.
  struct Row {
    std::int64_t metric{};
    std::optional<double> value, u;
    std::int64_t n{}, state{}, verdict{};
  };

  /// nullopt when no trial bears the uuid, or a row that it names is missing.
  std::optional<TrialBody> begun(std::string_view uuid);
  /// @param check  work trial.nogo and worst_margin out again
  std::optional<TrialBody> ended(std::string_view uuid, bool check = false);
  /// The same by who has just written the findings: as written, by rising metric. A NaN stands as NULL, -0 as 0, which
  /// is how SQLite gives them back.
  std::optional<TrialBody> ended(std::string_view uuid, std::vector<Row> findings);

  struct Entry {
    std::string sha256;
    std::int64_t orders{}, builds{}, reels{}, feeds{};  ///< rows
  };
  /// Of every record of lists whose row in `entered` has this id or a higher one, by that id.
  std::map<std::int64_t, Entry> entered(std::int64_t from_id);

  /// After a transaction that failed: what is remembered may not stand.
  void forget();

 private:
  using Id = std::int64_t;
  using Known = std::unordered_map<Id, std::string>;
  struct Limited {
    Id metric{};
    Limit limit;
  };
  struct Metrics {
    std::vector<std::size_t> order;  ///< by content, so that keys don't matter
    std::string sha256;
  };
  template <class Read>
  const std::string& known(Known& held, Id id, Read read);
  const std::string& setup(Id id);
  const std::string& revision(Id id);
  const std::string& applied(Id id);
  const std::string& equipment(Id id);
  const std::string& reduction(Id id);
  const std::string& metric(Id id);
  const std::string& station(Id id);
  const Metrics& metrics();
  const std::vector<Limited>& limits(Id applied);
  std::optional<TrialBody> ended(std::string_view uuid, bool check, bool read);
  void read_findings(Id trial);
  std::int64_t add_readings(Id trial);
  std::string misfit(const std::optional<Id>& applied, std::int64_t nogo, std::optional<double> worst);

  Database& db_;
  Canonical body_;
  std::vector<Row> rows_;
  std::vector<Id> key_;
  Known setups_, revisions_, applied_, equipment_, reductions_, metric_, stations_;
  std::map<std::vector<Id>, Metrics> metrics_;
  std::unordered_map<Id, std::vector<Limited>> limits_;
};

}  // namespace jigwright
