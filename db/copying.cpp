#include "db/copying.hpp"

#include <fcntl.h>
#include <fmt/format.h>
#include <sys/file.h>
#include <sys/stat.h>
#include <unistd.h>

#include <algorithm>
#include <cerrno>
#include <cstring>
#include <fstream>
#include <iterator>

#include "db/audit.hpp"
#include "db/backup.hpp"
#include "db/digest.hpp"

namespace jigwright {
namespace {

constexpr std::int64_t records_a_reading = 500;  ///< rows of one short transaction

Error error_about(const std::string& path, std::string what) {
  return {Error::Kind::store, std::move(what), path,
          "check the backups' folder and its disk; records are kept in the store meanwhile"};
}
Error error_at(const std::string& path, const char* what) {
  return error_about(path, std::string(what) + ": " + std::strerror(errno));
}

std::string bytes_of(const std::string& path) {
  std::ifstream in(path, std::ios::binary);
  return {std::istreambuf_iterator<char>(in), {}};
}

std::string store_uuid(Database& database) {
  Query q = database.query("SELECT value FROM meta WHERE key = 'store'");
  return q.next() ? q.text(0) : std::string();
}

std::string newest_backup(const std::string& folder) {
  const auto all = backups_in(folder);
  return all.empty() ? std::string() : all.back();
}

/// Where each chain ends; an Error when the store can't be read that far.
Result<std::map<std::string, ChainPlace>> heads_of(const std::string& path) {
  const auto store = Database::open(path, Database::Access::read, false, 0);
  if (!store) return store.error();
  Database& db = *store.value();
  std::map<std::string, ChainPlace> out;
  Query q = db.query("SELECT id, uuid FROM station");
  while (q.next()) {
    const JournalHead head = journal_head(db, q.integer(0));
    out[q.text(1)] = {head.epoch, head.seq};
  }
  return db.result(std::move(out));
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
  damaged_ = false;
  found_.reset();
  auto copied = copy_all();
  if (!copied) forget();
  if (copied && found_) return *found_;
  return copied;
}

/// After a failure nothing is taken for known: the next call reads the folder again.
void RecordCopies::forget() {
  if (file_ >= 0) ::close(file_);
  file_ = -1;
  path_.clear();
  known_ = 0;
  index_ = {};
  last_.clear();
  learned_ = unnamed_ = unsettled_ = false;
  frames_.forget();
}

Result<std::int64_t> RecordCopies::copy_all() {
  const bool known_folder = learned_;
  if (file_ >= 0 && !open_file_stands()) forget();
  for (std::int64_t all = 0;;) {
    const std::string newest = newest_backup(folder_);
    if (newest.empty() && known_folder)
      return error_about(folder_, "copies of records can't be kept: the folder has no backup any more");
    if (newest.empty()) return std::int64_t{0};
    if (const auto opened = open(folder_ + "/" + copies_of(newest)); !opened) return opened.error();
    if (const auto learned = learn(); !learned) return learned.error();
    const auto began = last_;
    const auto copied = copy_stations();
    if (!copied) return copied.error();
    all += copied.value();
    if (newest_backup(folder_) == newest) return all;
    last_ = began;  // a backup came meanwhile: a later one need not look into the file before its own
  }
}

/// Still the file of that name, and not shorter than it was.
bool RecordCopies::open_file_stands() const {
  struct stat opened {
  }, named{};
  return ::fstat(file_, &opened) == 0 && ::stat(path_.c_str(), &named) == 0 && opened.st_ino == named.st_ino &&
         opened.st_dev == named.st_dev && opened.st_size >= known_;
}

/// Learns once what the newest backup that can be read and the files since hold.
Result<Done> RecordCopies::learn() {
  if (learned_) return Done{};
  auto all = backups_in(folder_);
  for (; !all.empty(); all.pop_back()) {
    auto heads = heads_of(folder_ + "/" + all.back());
    if (heads) last_ = std::move(heads.value());
    if (heads) break;
    if (all.size() == 1) return heads.error();
  }
  for (const std::string& name : copies_since(folder_, all.back())) {
    if (folder_ + "/" + name == path_) continue;  // follow() reads it
    const std::string bytes = bytes_of(folder_ + "/" + name);
    if (const auto head = head_length(bytes, store_uuid(db_)); head)
      index_all_frames(std::string_view(bytes).substr(*head), index_);
  }
  index_.held.clear();
  learned_ = true;
  return Done{};
}

Result<Done> RecordCopies::open(const std::string& path) {
  if (path == path_) return Done{};
  if (file_ >= 0) ::close(file_);
  file_ = ::open(path.c_str(), O_RDWR | O_CREAT | O_CLOEXEC, 0666);
  path_ = file_ < 0 ? std::string() : path;
  if (file_ < 0) return error_at(path, "copies of records can't be kept");
  known_ = 0;
  index_.held.clear();
  unnamed_ = true;
  return Done{};
}

/// What stands in the open file behind what is known.
Result<std::string> RecordCopies::tail() const {
  struct stat status {};
  if (::fstat(file_, &status) != 0) return error_at(path_, "copies of records can't be read");
  if (status.st_size < known_) return error_about(path_, "the copies of records were cut off");
  std::string out(static_cast<std::size_t>(status.st_size - known_), '\0');
  std::size_t at = 0;
  while (at < out.size()) {
    const auto read = ::pread(file_, out.data() + at, out.size() - at, known_ + static_cast<off_t>(at));
    if (read < 0 && errno == EINTR) continue;
    if (read < 0) return error_at(path_, "copies of records can't be read");
    if (read == 0) break;
    at += static_cast<std::size_t>(read);
  }
  out.resize(at);
  return out;
}

/// Reads what another program, or this one before, wrote behind what is known; a torn end is cut off.
Result<Done> RecordCopies::follow() {
  const auto read = tail();
  if (!read) return read.error();
  std::string_view bytes = read.value();
  if (bytes.empty()) return Done{};
  const auto size = known_ + static_cast<std::int64_t>(bytes.size());
  if (known_ == 0) {
    const auto head = head_length(bytes, store_uuid(db_));
    if (!head && bytes.find('\n') != std::string_view::npos)
      return Error{Error::Kind::store, "these copies are of another store", path_,
                   "give each store a folder of its own for its backups"};
    bytes.remove_prefix(head.value_or(bytes.size()));
    known_ = static_cast<std::int64_t>(head.value_or(0));
  }
  known_ += static_cast<std::int64_t>(index_all_frames(bytes, index_).end);
  unsettled_ = true;
  if (known_ < size && ::ftruncate(file_, known_) != 0) return error_at(path_, "copies of records can't be kept");
  return Done{};
}

Result<std::vector<RecordCopies::Station>> RecordCopies::stations() {
  Transaction reading(db_, Transaction::Kind::read);
  std::vector<Station> out;
  {
    Query q = db_.query("SELECT id, uuid, name FROM station ORDER BY id");
    while (q.next()) out.push_back({q.integer(0), q.text(1), q.text(2)});
  }
  if (const auto done = reading.commit(); !done) return done.error();
  return out;
}

Result<std::int64_t> RecordCopies::copy_stations() {
  const Locked lock(file_);
  if (const auto followed = follow(); !followed) return followed.error();
  const auto all = stations();
  if (!all) return all.error();
  std::int64_t out = 0;
  for (const Station& station : all.value()) {
    const auto copied = copy_station(station);
    if (!copied) return copied.error();
    out += copied.value();
    if (!found_) found_ = forked(station);
  }
  if (const auto settled = settle_on_disk(); !settled) return settled.error();
  return out;
}

/// Copies lie here that are ahead of the store's own chain. A store that was restored is ahead of what it lost.
std::optional<Error> RecordCopies::forked(const Station& station) {
  const auto chain = index_.chains.find(station.uuid);
  if (chain == index_.chains.end() || chain->second.empty()) return std::nullopt;
  if (chain->second.rbegin()->first <= last_[station.uuid]) return std::nullopt;
  return Error{Error::Kind::store,
               "another copy of this store writes its records of station " + station.name + " here too", path_,
               "give that one another folder for its backups; restoring from this one would mix the two"};
}

Result<Done> RecordCopies::settle_on_disk() {
  if (unnamed_) {
    const int folder = ::open(folder_.c_str(), O_RDONLY | O_DIRECTORY | O_CLOEXEC);
    const bool named = folder >= 0 && (::fsync(folder) == 0 || errno == EINVAL);  // some shares know no such sync
    if (folder >= 0) ::close(folder);
    if (!named) return error_at(path_, "copies of records can't be kept");
  }
  if (unsettled_ && ::fdatasync(file_) != 0) return error_at(path_, "copies of records can't be kept");
  unnamed_ = unsettled_ = false;
  return Done{};
}

/// Frames of the next records that no file holds.
Result<RecordCopies::Batch> RecordCopies::next_batch(const Station& station) {
  CopyIndex::Chain& copied = index_.chains[station.uuid];
  Batch out;
  out.last = last_[station.uuid];
  std::vector<ChainRow> rows;
  Transaction reading(db_, Transaction::Kind::read);
  {
    Query q = db_.query(
        "SELECT epoch, seq, kind, uuid, at_us, body_sha256, hash FROM journal WHERE station = ? AND "
        "(epoch, seq) > (?, ?) ORDER BY epoch, seq LIMIT ?",
        station.id, out.last.epoch, out.last.seq, records_a_reading);
    while (q.next())
      rows.push_back({station.uuid,
                      station.name,
                      {q.integer(0), q.integer(1), q.integer(2), q.text(3), q.integer(4), q.text(5)},
                      q.text(6)});
  }
  for (const ChainRow& row : rows) {
    const ChainPlace at{row.row.epoch, row.row.seq};
    const auto found = copied.find(at);
    if (found == copied.end() || !found->second.contains(row.hash)) {
      const auto frames = frames_.of(row, index_.held);
      if (!frames) out.damage = frames.error();
      if (!frames) break;
      out.frames += frames.value();
      ++out.records;
    }
    out.last = at;
    copied.erase(copied.begin(), copied.upper_bound(at));
  }
  if (const auto done = reading.commit(); !done) return done.error();
  out.more = static_cast<std::int64_t>(rows.size()) == records_a_reading && !out.damage;
  return out;
}

Result<std::int64_t> RecordCopies::copy_station(const Station& station) {
  std::int64_t copied = 0;
  for (bool more = true; more;) {
    const auto batch = next_batch(station);
    if (!batch) return batch.error();
    const std::string head = known_ == 0 ? copies_head(store_uuid(db_)) : std::string();
    if (!batch.value().frames.empty())
      if (const auto done = append(head + batch.value().frames); !done) return done.error();
    last_[station.uuid] = batch.value().last;
    copied += batch.value().records;
    more = batch.value().more;
    if (!batch.value().damage) continue;
    damaged_ = true;
    found_ =
        Error{Error::Kind::store, "the store is damaged: " + batch.value().damage->what, db_.path(), restore_advice};
  }
  return copied;
}

Result<Done> RecordCopies::append(const std::string& frames) {
  unsettled_ = true;
  std::size_t at = 0;
  while (at < frames.size()) {
    const auto wrote = ::pwrite(file_, frames.data() + at, frames.size() - at, known_ + static_cast<off_t>(at));
    if (wrote < 0 && errno == EINTR) continue;
    if (wrote < 0) return error_at(path_, "copies of records can't be kept");
    at += static_cast<std::size_t>(wrote);
  }
  known_ += static_cast<std::int64_t>(frames.size());
  return Done{};
}

}  // namespace jigwright
