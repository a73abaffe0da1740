// Column blocks: each metric's findings over stretches of 512 trials, one after the other, so that a question over one
// metric of a million boards reads that metric only. Derived from the rows of `finding` and `trial`: any block may be
// deleted at will, is then read from the rows, and is built again. db/'s own; one thread.
//
// Table column_block: a row a metric and stretch. Stretch s holds the trials with ids 512 s + 1 to 512 s + 512. It is
// complete once a trial with a higher id stands and none of its trials is open; its findings then never change. Only
// complete stretches have blocks, a metric without a finding there has none.
//
// A block's body, low byte first:
//   1 byte          1, the form
//   4 bytes         the least metric id with findings in the stretch
//   2 bytes         n
//   n bytes         a bit for each metric id from that one on, the lowest first: the stretch has findings of it. So any
//                   block tells whether one that is missing was deleted or never was
//   64 bytes        a bit for each trial of the stretch, the lowest first: it has a finding here
//   8 bytes each    values as IEEE 754 binary64, by rising trial; the quiet NaN 0x7ff8000000000000 for none
//   1 byte each     state, + 8 x verdict, + 64 when it was the board's first trial
#pragma once
#include <cstdint>
#include <functional>
#include <optional>
#include <string>
#include <vector>

#include "db/metrics.hpp"
#include "limits/judge.hpp"

namespace jigwright {

constexpr std::int64_t stretch_trials = 512;

/// One metric's findings by rising trial id, as columns of the same length.
struct MetricColumns {
  std::vector<std::int64_t> trials;  ///< ids, inside the store only
  std::vector<double> values;        ///< NaN for none
  std::vector<FindingState> states;
  std::vector<Verdict> verdicts;
  std::vector<std::uint8_t> firsts;  ///< 1 = the board's first trial
};

/// From blocks, and from the rows where there is none, in the caller's transaction. A damaged block counts as missing.
/// Error kind store.
Result<MetricColumns> read_columns(Database& database, std::int64_t metric);

/// The same by name, in one short transaction.
/// @param unit  for a metric whose unit was changed, or that was about the jig before; the newest without it
/// @return errors of find_metrics(); Error kind store
Result<MetricColumns> read_metric(Database& database, const std::string& step, const std::string& name,
                                  const std::string& variant, std::optional<Unit> unit = std::nullopt);

/// Builds missing blocks, the newest stretches first. Remembers where it has looked.
class ColumnKeeper {
 public:
  explicit ColumnKeeper(Database& database) : db_(database) {}

  /// Builds the missing blocks of at most so many stretches, each in a write transaction; looks through a bounded
  /// number of older ones. Where nothing is to do, it reads one row.
  /// @return stretches built. Error kind store: that stretch is tried again later
  Result<int> upkeep(int most_built);

 private:
  using Stretch = std::int64_t;
  enum class Settled { whole, built, open };
  Result<Done> look();
  std::optional<Stretch> next(int& looked);
  Settled found(Stretch stretch);
  Result<Settled> settle(Stretch stretch);

  Database& db_;
  Stretch last_{0};             ///< the stretch under way when last looked
  std::optional<Stretch> top_;  ///< looked at: bottom_ up to this one, not itself
  Stretch bottom_{0};
  std::vector<Stretch> again_, later_;  ///< later_: a trial was open, or building failed
};

/// For an audit, in its transaction: tells of each block that is not what the rows give. One scan of the rows.
void check_blocks(Database& database, const std::function<void(std::string)>& differs);

}  // namespace jigwright
