// Makes the frames of a record from its rows: the record, and before it whatever it names that the file has not. Db/'s
// own; one thread, inside a transaction.
#pragma once
#include <string>
#include <unordered_set>

#include "db/bodies.hpp"
#include "db/journal.hpp"
#include "db/record_copy.hpp"

namespace jigwright {

/// A row of the journal with its station and its hash.
struct ChainRow {
  std::string station_uuid, station;
  JournalRow row;
  std::string hash;
};

class RecordFrames {
 public:
  explicit RecordFrames(Database& database) : db_(database), bodies_(database) {}

  /// @param held  parts and documents that the file has, by SHA-256; those of the frames are added
  /// @return Error kind store when the rows are not what was recorded: such a copy would be of no use
  Result<std::string> of(const ChainRow& record, std::unordered_set<std::string>& held);
  /// After an error of the database: what was remembered of its rows.
  void forget() { bodies_.forget(); }

 private:
  void add_part(const Part& part, std::unordered_set<std::string>& held, std::string& out);
  void add_documents(std::unordered_set<std::string>& held, std::string& out);
  void add_body(const ChainRow& record, RecordCopy& copy);

  Database& db_;
  Bodies bodies_;
};

}  // namespace jigwright
