// Keeps copies of every record made since the last backup, in a file of the backups' folder: backup and copies together
// restore a store that was damaged. Copies are made from the rows once a record is durable, so that what is
// missing (after a power cut, a disk that was away) is caught up with by the next call. Db/'s writer; one thread at a
// time; several programs may copy in turn.
#pragma once
#include <cstdint>
#include <map>
#include <optional>
#include <string>
#include <vector>

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
  /// Nothing is copied before there is a backup. A record that is not as it was made is not copied, nor is what
  /// follows.
  /// @return records; Error kind store: the folder can't be written, the store can't be read. The next call tries again
  Result<std::int64_t> catch_up();

  /// The last call found that the store is damaged; its error says where.
  bool damaged() const { return damaged_; }

 private:
  struct Station {
    std::int64_t id{};
    std::string uuid, name;
  };
  Result<std::int64_t> copy_all();
  bool open_file_stands() const;
  Result<Done> learn();
  Result<Done> open(const std::string& path);
  Result<Done> follow();
  Result<std::string> tail() const;
  Result<std::vector<Station>> stations();
  Result<std::int64_t> copy_stations();
  Result<std::int64_t> copy_station(const Station& station);
  struct Batch {
    std::string frames;
    ChainPlace last;
    std::int64_t records{};
    bool more{false};
    std::optional<Error> damage;  ///< of the record behind these
  };
  Result<Batch> next_batch(const Station& station);
  Result<Done> append(const std::string& frames);
  Result<Done> settle_on_disk();
  std::optional<Error> forked(const Station& station);
  void forget();

  Database& db_;
  std::string folder_;
  RecordFrames frames_;
  CopyIndex index_;                         ///< records of all files behind the backup; `held`: of the open file only
  std::map<std::string, ChainPlace> last_;  ///< up to there all is copied or in a backup; by the station's uuid
  bool learned_{false};                     ///< the two above, from the folder
  std::string path_;                        ///< of the open file
  int file_{-1};
  std::int64_t known_{0};  ///< bytes of the open file that are in the index
  bool unnamed_{false};    ///< the file's name may not be on the disk yet
  bool unsettled_{false};  ///< nor something in it
  bool damaged_{false};
  std::optional<Error> found_;  ///< what the last call found, with everything else copied
};

}  // namespace jigwright
