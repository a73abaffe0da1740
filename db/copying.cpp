#include "db/copying.hpp"

#include <fcntl.h>
#include <sys/file.h>
#include <sys/stat.h>
#include <unistd.h>

#include <cerrno>
#include <cstring>
#include <fstream>
#include <iterator>

#include "db/backup.hpp"
#include "db/digest.hpp"

namespace jigwright {
namespace {

constexpr std::int64_t records_a_reading = 500;  ///< rows of one short transaction

Error error_at(const std::string& path, const char* what) {
  return {Error::Kind::store, std::string(what) + ": " + std::strerror(errno), path,
          "check the backups' folder and its disk; records are kept in the store meanwhile"};
}

std::string bytes_of(const std::string& path) {
  std::ifstream in(path, std::ios::binary);
  return {std::istreambuf_iterator<char>(in), {}};
}

std::string store_uuid(Database& database) {
  Query q = database.query("SELECT value FROM meta WHERE key = 'store'");
  return q.next() ? q.text(0) : std::string();
}

class Locked {
 public:
  explicit Locked(int file) : file_(file) { ::flock(file_, LOCK_EX); }
  ~Locked() { ::flock(file_, LOCK_UN); }
  Locked(const Locked&) = delete;
  Locked& operator=(const Locked&) = delete;

 private:
  int file_;
};

}  // namespace

RecordCopies::~RecordCopies() {
  if (file_ >= 0) ::close(file_);
}

Result<std::int64_t> RecordCopies::catch_up() {
  if (backups_in(folder_).empty()) return std::int64_t{0};
  if (const auto settled = settle(); !settled) return settled.error();
  const Locked lock(file_);
  if (const auto followed = follow(); !followed) return followed.error();
  struct Station {
    std::int64_t id;
    std::string uuid, name;
  };
  std::vector<Station> stations;
  {
    Query q = db_.query("SELECT id, uuid, name FROM station");
    while (q.next()) stations.push_back({q.integer(0), q.text(1), q.text(2)});
  }
  std::int64_t all = 0;
  for (const Station& s : stations) {
    const auto copied = copy_station(s.id, s.uuid, s.name);
    if (!copied) return copied.error();
    all += copied.value();
  }
  if (all > 0 && ::fdatasync(file_) != 0) return error_at(path_, "copies of records can't be kept");
  return all;
}

/// Opens the newest backup's file, and learns once what that backup and the files since hold.
Result<Done> RecordCopies::settle() {
  const std::string newest = backups_in(folder_).back();
  if (index_.last.empty()) {
    auto backup = Database::open(folder_ + "/" + newest, Database::Access::read, false, 0);
    if (!backup) return backup.error();
    Database& db = *backup.value();
    Query q = db.query("SELECT id, uuid FROM station");
    while (q.next()) {
      const JournalHead head = journal_head(db, q.integer(0));
      index_.last[q.text(1)] = {head.epoch, head.seq};
    }
    if (db.failed()) return db.error();
    for (const std::string& name : copies_since(folder_, newest)) {
      const std::string bytes = bytes_of(folder_ + "/" + name);
      if (const auto head = head_length(bytes, store_uuid(db_)); head)
        index_frames(std::string_view(bytes).substr(*head), index_);
    }
  }
  const std::string path = folder_ + "/" + copies_of(newest);
  return path == path_ ? Result<Done>(Done{}) : open(path);
}

Result<Done> RecordCopies::open(const std::string& path) {
  if (file_ >= 0) ::close(file_);
  file_ = ::open(path.c_str(), O_RDWR | O_CREAT | O_CLOEXEC, 0666);
  path_ = file_ < 0 ? std::string() : path;
  if (file_ < 0) return error_at(path, "copies of records can't be kept");
  known_ = 0;
  index_.held.clear();
  return Done{};
}

/// Reads what another program, or this one before, wrote behind what is known; a torn end is cut off.
Result<Done> RecordCopies::follow() {
  struct stat status {};
  if (::fstat(file_, &status) != 0) return error_at(path_, "copies of records can't be read");
  if (status.st_size == known_) return Done{};
  std::string bytes = bytes_of(path_);
  if (known_ == 0) {
    const auto head = head_length(bytes, store_uuid(db_));
    if (!head && bytes.find('\n') != std::string::npos)
      return Error{Error::Kind::store, "these copies are of another store", path_,
                   "give each store a folder of its own for its backups"};
    known_ = static_cast<std::int64_t>(head.value_or(0));
  }
  if (known_ > 0) {
    known_ += static_cast<std::int64_t>(
        index_frames(std::string_view(bytes).substr(static_cast<std::size_t>(known_)), index_));
  }
  if (::ftruncate(file_, known_) != 0) return error_at(path_, "copies of records can't be kept");
  return Done{};
}

Result<std::int64_t> RecordCopies::copy_station(std::int64_t station, const std::string& uuid,
                                                const std::string& name) {
  std::int64_t copied = 0;
  for (bool more = true; more;) {
    const ChainPlace after = index_.last[uuid];
    std::vector<ChainRow> rows;
    std::string frames = known_ == 0 ? copies_head(store_uuid(db_)) : std::string();
    {
      Transaction reading(db_, Transaction::Kind::read);
      {
        Query q = db_.query(
            "SELECT epoch, seq, kind, uuid, at_us, body_sha256, hash FROM journal WHERE station = ? AND "
            "(epoch, seq) > (?, ?) ORDER BY epoch, seq LIMIT ?",
            station, after.epoch, after.seq, records_a_reading);
        while (q.next())
          rows.push_back(
              {uuid, name, {q.integer(0), q.integer(1), q.integer(2), q.text(3), q.integer(4), q.text(5)}, q.text(6)});
      }
      for (const ChainRow& row : rows) frames += frames_.of(row, index_.held);
      if (const auto done = reading.commit(); !done) return done.error();
    }
    more = static_cast<std::int64_t>(rows.size()) == records_a_reading;
    if (rows.empty()) continue;
    if (const auto done = append(frames); !done) return done.error();
    index_.last[uuid] = {rows.back().row.epoch, rows.back().row.seq};
    copied += static_cast<std::int64_t>(rows.size());
  }
  return copied;
}

Result<Done> RecordCopies::append(const std::string& frames) {
  std::size_t at = 0;
  while (at < frames.size()) {
    const auto wrote = ::pwrite(file_, frames.data() + at, frames.size() - at, known_ + static_cast<off_t>(at));
    if (wrote < 0 && errno == EINTR) continue;
    if (wrote < 0) {
      const Error error = error_at(path_, "copies of records can't be kept");
      index_.held.clear();  // what was taken for written is not: begin the file's index anew
      known_ = 0;
      return error;
    }
    at += static_cast<std::size_t>(wrote);
  }
  known_ += static_cast<std::int64_t>(frames.size());
  return Done{};
}

}  // namespace jigwright
