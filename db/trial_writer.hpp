// Writes trials into the store's tables: the work behind Store::begin_trial and finish_trial. What many trials share
// (documents, limits, identities, metrics) is kept once and remembered here by its id. db/'s own; one thread.
#pragma once
#include <map>
#include <string>
#include <tuple>
#include <unordered_map>

#include "db/bodies.hpp"
#include "db/sqlite.hpp"
#include "db/trial_copy.hpp"
#include "db/trial_log.hpp"

namespace jigwright {

class TrialWriter {
 public:
  TrialWriter(Database& database, UuidMaker& uuids) : db_(database), uuids_(uuids), bodies_(database) {}

  Result<OpenTrial> begin(const TrialStart& start);
  Result<Done> finish(const OpenTrial& open, const TrialEnd& end);
  /// Writes a copy of a trial's record, all in the caller's transaction; an open row of the same uuid becomes it. What
  /// can't be written so that it bears its own names and hashes fails the database or shows in the journal's hash.
  void replay(const TrialCopy& copy);
  /// The same of its begin alone: the trial stands as open, for a later replay() to end.
  void replay_begin(const TrialCopy& copy);
  /// After a transaction that was rolled back: what was remembered of its rows.
  void forget();
  /// Gives every open trial of the station its record, as cut short: for whoever alone drives the station.
  /// @return how many
  Result<int> close_cut_short(const std::string& station, std::int64_t at_us);

 private:
  using Id = std::int64_t;
  struct Setup {
    std::string plan, program, limit_set;
    std::int64_t number{};
    std::vector<Document> documents;
    Id setup{}, revision{};
  };
  struct Applied {
    std::vector<Id> metrics;
    std::vector<std::optional<Limit>> limits;
    Id id{};
  };
  struct Tally {
    int missed{0};
    std::optional<Id> deciding, worst;
    std::optional<double> worst_margin;
  };
  std::optional<std::int64_t> adopted(const TrialStart& start);
  void check_origin(const TrialStart& start);
  Id board(const std::string& serial);
  Id order(const std::string& name);
  Id person(const std::string& name);
  void settle_setup(const TrialStart& start);
  Id document(const Document& document);
  Id setup(const TrialStart& start, const std::vector<Id>& documents);
  Id revision(const TrialStart& start, std::optional<Id> document);
  Id metric(const Metric& metric);
  Id applied(const std::vector<FindingRow>& rows, const std::vector<Id>& metrics);
  Id settle_applied(const std::vector<FindingRow>& rows, const std::vector<Id>& metrics);
  Id equipment(const std::vector<InstrumentIdentity>& instruments);
  Id instrument(const InstrumentIdentity& identity);
  Id reduction(const std::vector<std::pair<std::string, int>>& versions);
  /// @param attempt  0 = the next of the board
  void insert_open(const TrialStart& start, OpenTrial& open, int attempt = 0);
  /// @return findings as written
  std::vector<Bodies::Row> write_end(const OpenTrial& open, const TrialEnd& end, const Tally& tally,
                                     const std::vector<Id>& metrics);
  void settle_copied(const TrialCopy& copy);
  /// @return the rows as written
  std::vector<Bodies::Row> insert_findings(const OpenTrial& open, const std::vector<FindingRow>& rows,
                                           const std::vector<Id>& metrics);
  void insert_applied_limit(Id applied, Id metric, const Limit& limit);
  void close(const OpenTrial& open, const TrialEnd& end, const Tally& tally, Id applied);
  void mark(const OpenTrial& open);
  void journal(const OpenTrial& open, const TrialEnd& end, std::vector<Bodies::Row> findings);

  Database& db_;
  UuidMaker& uuids_;
  Bodies bodies_;
  std::optional<Setup> setup_;           ///< of the last trial begun
  std::optional<Applied> last_applied_;  ///< of the last trial ended
  std::map<std::tuple<std::string, std::string, std::string, int, int>, Id> metrics_;
  std::unordered_map<std::string, Id> applied_, equipment_, reduction_;  ///< by digest
};

}  // namespace jigwright
