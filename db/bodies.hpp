// The canonical bodies of records, read back from the rows that hold them: whoever writes a record takes its body's
// hash from here, an audit does so again, so that a row changed since shows, and a copy of a record is its body's
// bytes. Names and contents go in, integer keys do not; docs/store.md lays a body out field by field. What many trials
// share is a part of its own, which a body names by its hash and which is remembered here. db/'s own; one thread,
// inside a transaction.
#pragma once
#include <cstdint>
#include <functional>
#include <map>
#include <optional>
#include <string>
#include <unordered_map>
#include <utility>
#include <vector>

#include "db/canonical.hpp"
#include "db/sqlite.hpp"
#include "db/trial_record.hpp"
#include "limits/limit.hpp"

namespace jigwright {

/// What many records share: its canonical bytes, and their hash.
struct Part {
  std::string bytes, sha256;
};

/// Stored; never renumbered.
enum class TrialState : std::uint8_t { open = 0, ended = 1, cut_short = 2 };

/// A trial's rows as a body found them.
struct TrialBody {
  std::int64_t id{};
  std::int64_t station{};
  std::string serial;
  TrialState state{TrialState::open};
  std::string sha256;                   ///< of the body
  std::string mark;                     ///< what the row holds: the hash of its body as begun; empty = none
  std::int64_t findings{}, readings{};  ///< rows
  bool readings_kept{};                 ///< not archived away
  std::string misfit;  ///< a derived column that disagrees with the findings; empty = none; checked on request
};

class Bodies {
 public:
  using Id = std::int64_t;
  explicit Bodies(Database& database) : db_(database) {}

  /// A finding's row.
  struct Row {
    Id metric{};
    std::optional<double> value, u;
    std::int64_t n{}, state{}, verdict{};
  };

  /// nullopt when no trial bears the uuid, or a row that it names is missing.
  /// @param check  work trial.nogo and worst_margin out again
  std::optional<TrialBody> trial(std::string_view uuid, bool check = false);
  /// The same by who has just written the findings: as written, by rising metric. A NaN stands as NULL, -0 as 0, which
  /// is how SQLite gives them back.
  std::optional<TrialBody> trial(std::string_view uuid, std::vector<Row> findings);
  /// The last trial's body, and the parts that it names, until the next call.
  const std::string& bytes() const { return body_.bytes(); }
  const std::vector<const Part*>& parts() const { return parts_; }

  struct Entry {
    std::int64_t orders{}, builds{}, reels{}, feeds{}, dropped{};  ///< rows
  };
  /// Gets the body of a list's record piece by piece: which row of `entered`, and the next bytes of its body.
  using Sink = std::function<void(Id, std::string_view)>;
  /// Every record of lists whose row in `entered` lies in first .. last.
  std::map<Id, Entry> entered(Id first, Id last, const Sink& sink);

  /// Bodies of one row; nullopt where no row bears the uuid.
  std::optional<std::string> epoch_begun(std::string_view uuid);
  std::optional<std::string> archived(std::string_view uuid);
  /// With its boards and values.
  std::optional<std::string> act(std::string_view uuid);

  /// What a setup's part will be, before there is one.
  Part setup_part(const std::string& plan, const std::string& program, const std::vector<Id>& documents);
  const Part& station(Id id);
  const Part& setup(Id id);
  const Part& revision(Id id);
  const Part& applied(Id id);
  const Part& equipment(Id id);
  const Part& reduction(Id id);

  /// After a transaction that failed: what is remembered may not stand.
  void forget();

 private:
  using Known = std::unordered_map<Id, Part>;
  struct Limited {
    Id metric{};
    Limit limit;
  };
  struct Metrics {
    std::vector<std::size_t> order;  ///< by content, so that keys don't matter
    Part part;
  };
  template <class Read>
  const Part& known(Known& held, Id id, Read read);
  const Part& metric(Id id);
  const Metrics& metrics();
  const std::vector<Limited>& limits(Id applied);
  std::optional<TrialBody> read(std::string_view uuid, bool check, bool findings);
  void name(const Part& part);
  void read_findings(Id trial);
  void add_readings(TrialBody& trial);
  std::string misfit(const std::optional<Id>& applied, std::int64_t nogo, std::optional<double> worst);
  std::optional<std::string> only(Query query, int columns);

  Database& db_;
  Canonical body_;
  std::vector<const Part*> parts_;
  std::vector<Row> rows_;
  std::vector<Id> key_;
  Known setups_, revisions_, applied_, equipment_, reductions_, metric_, stations_;
  std::map<std::vector<Id>, Metrics> metrics_;
  std::unordered_map<Id, std::vector<Limited>> limits_;
};

/// The parts that a writer must know before it has rows: of limits, instruments and versions. `metrics` and `limits`
/// go together.
Part limits_part(const std::vector<std::pair<Metric, Limit>>& limits);
Part instruments_part(std::vector<InstrumentIdentity> instruments);
Part versions_part(std::vector<std::pair<std::string, int>> versions);

}  // namespace jigwright
