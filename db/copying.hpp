// Keeps copies of every record made since the last backup, in a file of the backups' folder: backup and copies together
// restore a store that was damaged. Copies are made from the rows once a record is durable, so that what is
// missing (after a power cut, a disk that was away) is caught up with by the next call. Db/'s writer; one thread at a
// time; several programs may copy in turn.
#pragma once
#include <cstdint>
#include <string>

#include "db/record_copy.hpp"
#include "db/record_frames.hpp"

namespace jigwright {

class RecordCopies {
 public:
  RecordCopies(Database& database, std::string folder) : db_(database), folder_(std::move(folder)), frames_(database) {}
  ~RecordCopies();
  RecordCopies(const RecordCopies&) = delete;
  RecordCopies& operator=(const RecordCopies&) = delete;

  /// Appends every record of the store behind the last one that a backup or a file of copies holds; durable at return.
  /// Nothing is copied before there is a backup.
  /// @return records; Error kind store: the folder can't be written, the store can't be read. The next call tries again
  Result<std::int64_t> catch_up();

 private:
  Result<Done> settle();
  Result<Done> open(const std::string& path);
  Result<Done> follow();
  Result<std::int64_t> copy_station(std::int64_t station, const std::string& uuid, const std::string& name);
  Result<Done> append(const std::string& frames);

  Database& db_;
  std::string folder_;
  RecordFrames frames_;
  CopyIndex index_;   ///< `held`: of the open file only
  std::string path_;  ///< of the open file
  int file_{-1};
  std::int64_t known_{0};  ///< bytes of the open file that are in the index
};

}  // namespace jigwright
