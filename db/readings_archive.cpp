#include "db/readings_archive.hpp"

#include <fcntl.h>
#include <sys/stat.h>
#include <unistd.h>

#include <algorithm>
#include <cerrno>
#include <cstring>
#include <fstream>
#include <iterator>

#include "db/audit.hpp"
#include "db/bodies.hpp"
#include "db/digest.hpp"
#include "db/journal.hpp"
#include "db/record_frames.hpp"
#include "db/sqlite.hpp"

namespace jigwright {
namespace {

Error error_at(const std::string& path, const std::string& what) {
  return {Error::Kind::store, what, path, "name a new file on a disk with room; the store is unchanged"};
}

/// A new file that is written piece by piece, hashed meanwhile, and removed unless it is kept.
class NewFile {
 public:
  explicit NewFile(const std::string& path)
      : path_(path), file_(::open(path.c_str(), O_WRONLY | O_CREAT | O_EXCL | O_CLOEXEC, 0666)), made_(file_ >= 0) {
    if (!made_) reason_ = std::strerror(errno);
  }
  ~NewFile() {
    if (file_ >= 0) ::close(file_);
    if (made_ && !kept_) ::unlink(path_.c_str());
  }
  NewFile(const NewFile&) = delete;
  NewFile& operator=(const NewFile&) = delete;

  void write(std::string_view bytes) {
    hash_.add(bytes);
    while (reason_.empty() && !bytes.empty()) {
      const auto wrote = ::write(file_, bytes.data(), bytes.size());
      if (wrote < 0 && errno != EINTR) reason_ = std::strerror(errno);
      if (wrote > 0) bytes.remove_prefix(static_cast<std::size_t>(wrote));
    }
  }
  /// To the disk with its name, and out of memory, so that reading it back reads the disk.
  void sync() {
    if (reason_.empty() && ::fsync(file_) != 0) reason_ = std::strerror(errno);
    ::posix_fadvise(file_, 0, 0, POSIX_FADV_DONTNEED);
    const auto slash = path_.rfind('/');
    const std::string folder = slash == std::string::npos ? "." : path_.substr(0, slash + 1);
    const int opened = ::open(folder.c_str(), O_RDONLY | O_DIRECTORY | O_CLOEXEC);
    if (reason_.empty() && (opened < 0 || (::fsync(opened) != 0 && errno != EINVAL))) reason_ = std::strerror(errno);
    if (opened >= 0) ::close(opened);
  }
  std::string digest() { return hash_.digest(); }
  const std::string& reason() const { return reason_; }  ///< empty = all is well
  void keep() { kept_ = true; }

 private:
  std::string path_, reason_;
  int file_;
  bool made_, kept_{false};
  Sha256 hash_;
};

/// The records of trials that began before and still have their readings, by chain.
class Old {
 public:
  Old(Database& database, std::int64_t before_us)
      : rows_(database.query(
            "SELECT s.uuid, s.name, j.epoch, j.seq, j.kind, j.uuid, j.at_us, j.body_sha256, j.hash, length(r.body) "
            "FROM station s CROSS JOIN journal j ON j.station = s.id CROSS JOIN trial t ON t.uuid = j.uuid "
            "CROSS JOIN reading_blob r ON r.trial = t.id "
            "WHERE j.kind = 4 AND t.at_us < ? AND r.body IS NOT NULL ORDER BY s.id, j.epoch, j.seq",
            before_us)) {}
  bool next() { return rows_.next(); }
  ChainRow row() const {
    return {rows_.text(0),
            rows_.text(1),
            {rows_.integer(2), rows_.integer(3), rows_.integer(4), rows_.text(5), rows_.integer(6), rows_.text(7)},
            rows_.text(8)};
  }
  std::int64_t length() const { return rows_.integer(9); }

 private:
  Query rows_;
};

Result<Archived> write_copies(Database& database, NewFile& file, std::int64_t before_us) {
  Archived out;
  std::string uuid;
  if (Query q = database.query("SELECT value FROM meta WHERE key = 'store'"); q.next()) uuid = q.text(0);
  file.write(copies_head(uuid));
  RecordFrames frames(database);
  std::unordered_set<std::string> held;
  Old old(database, before_us);
  while (file.reason().empty() && old.next()) {
    const auto copy = frames.of(old.row(), held);
    if (!copy && !database.failed()) return copy.error();
    if (!copy) break;
    file.write(copy.value());
    ++out.trials;
    out.bytes += old.length();
  }
  file.sync();
  return out;
}

/// Whether the file reads back as so many sound records with their readings.
bool reads_back(const std::string& path, const Archived& expected) {
  std::ifstream in(path, std::ios::binary);
  const std::string bytes{std::istreambuf_iterator<char>(in), {}};
  const auto head = head_length(bytes, "");
  CopySet copies;
  if (!head || *head + read_frames(std::string_view(bytes).substr(*head), copies) != bytes.size()) return false;
  Archived found;
  for (const auto& [station, chain] : copies.chains)
    for (const auto& [place, record] : chain) {
      ++found.trials;
      found.bytes += static_cast<std::int64_t>(record.readings.size());
    }
  return found.trials == expected.trials && found.bytes == expected.bytes;
}

/// Where a step of so many trials ends; those that began in one microsecond stay together.
std::int64_t step_end_us(Database& database, std::int64_t before_us, std::int64_t at_once) {
  std::int64_t first_us = before_us;
  Query q = database.query(
      "SELECT t.at_us FROM trial t JOIN reading_blob r ON r.trial = t.id WHERE t.at_us < ? AND r.body IS NOT NULL "
      "ORDER BY t.at_us LIMIT ?",
      before_us, at_once + 1);
  std::int64_t found = 0, last_us = before_us;
  for (; q.next(); ++found) {
    last_us = q.integer(0);
    if (found == 0) first_us = last_us;
  }
  return found <= at_once ? before_us : std::max(last_us, first_us + 1);
}

}  // namespace

Result<Archived> archive_readings(Database& database, UuidMaker& uuids, const std::string& file, std::int64_t before_us,
                                  const std::string& station, const std::string& who, std::int64_t now_us,
                                  std::int64_t at_once) {
  Transaction transaction(database, Transaction::Kind::write);
  before_us = std::min(before_us, step_end_us(database, before_us, at_once));
  NewFile copies(file);
  if (!copies.reason().empty()) return error_at(file, "the archive can't be made: " + copies.reason());
  const auto written = write_copies(database, copies, before_us);
  if (!written)
    return Error{Error::Kind::store, "the store is damaged: " + written.error().what, database.path(), restore_advice};
  const Archived out = written.value();
  if (!copies.reason().empty()) return error_at(file, "the archive can't be written: " + copies.reason());
  if (!database.failed() && !reads_back(file, out)) return error_at(file, "the archive does not read back as written");
  if (out.trials == 0) return database.result(out);
  const std::int64_t dropped = drop_readings(database, before_us);
  if (!database.failed() && dropped != out.trials)
    return error_at(file, "some trials with raw readings have no record: run \"jigwright audit\"");
  const Uuid uuid = uuids.next(now_us / 1000);
  const std::string digest = copies.digest();
  const std::int64_t at = station_row(database, uuids, station, now_us);
  database.run("INSERT INTO archived(uuid, who, before_us, trials, bytes, name, sha256) VALUES(?, ?, ?, ?, ?, ?, ?)",
               Blob{bytes(uuid)}, who.empty() ? std::nullopt : std::optional(who), before_us, out.trials, out.bytes,
               file.substr(file.rfind('/') + 1), Blob{digest});
  if (const auto body = Bodies(database).archived(bytes(uuid)); body && !database.failed())
    append_record(database, at, RecordKind::readings_archived, bytes(uuid), now_us, sha256(*body));
  if (const auto done = transaction.commit(); !done) return done.error();
  copies.keep();
  return out;
}

std::int64_t drop_readings(Database& database, std::int64_t before_us) {
  std::vector<std::pair<std::int64_t, std::string>> hashes;
  {
    Query q = database.query(
        "SELECT r.trial, r.body FROM reading_blob r JOIN trial t ON t.id = r.trial WHERE t.at_us < ? AND "
        "r.body IS NOT NULL",
        before_us);
    while (q.next()) hashes.emplace_back(q.integer(0), sha256(q.view(1)));
  }
  for (const auto& [trial, hash] : hashes)
    database.run("UPDATE reading_blob SET body = NULL, sha256 = ? WHERE trial = ?", Blob{hash}, trial);
  return static_cast<std::int64_t>(hashes.size());
}

}  // namespace jigwright
