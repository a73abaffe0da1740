// A disk in memory for SQLite, for tests: it forgets at a power cut what was not synced, and fails the operation that
// it is told to fail. While it lives it is SQLite's default file system, so that Store::open() needs no word about it;
// paths are mere names. One disk at a time, one connection at a time (locks always succeed), one thread.
//
// What a cut may do to a file: every write and truncation since the file's last sync is lost, kept or torn, each by its
// own seeded draw and in no order; a torn write keeps, loses or garbles each sector of 512 bytes by itself. Bytes that
// were not being written stay (SQLite relies on that: "powersafe overwrite", sqlite.org/psow.html). A new file's name
// is sure to last from the file's first sync, a removal from the folder's, which the first sync of a new log or journal
// brings along, as in SQLite's own Unix layer. A sync that fails leaves its writes
// unsynced for good, as Linux may (the pages count as clean afterwards), unless they are written again.
#pragma once
#include <sqlite3.h>

#include <cstdint>
#include <map>
#include <memory>
#include <random>
#include <string>
#include <vector>

namespace jigwright::room {

class FaultDisk {
 public:
  enum class Failure { io, full };  ///< `full`: writes only, after half of the bytes went out
  struct File;

  explicit FaultDisk(std::uint64_t seed);
  ~FaultDisk();
  FaultDisk(const FaultDisk&) = delete;
  FaultDisk& operator=(const FaultDisk&) = delete;

  /// The power goes at the n-th operation from now, 1 being the next: it and all later ones fail until power_up().
  void cut_at(std::int64_t n) { cut_at_ = operations_ + n; }
  bool dark() const { return dark_; }
  /// Cuts the power now, if it is on, and leaves of every file what a disk would have. Close the database first.
  void power_up();

  /// The n-th operation from now fails; with `lasting` every later one too. For Failure::full only writes count.
  void fail_at(std::int64_t n, Failure failure, bool lasting);
  void heal() { fail_at_ = 0; }
  bool fired() const { return fired_; }  ///< since fail_at()

  /// Files by name, as they stand; start_from() puts them on this disk as synced ones, for a store of their own.
  using Image = std::map<std::string, std::string>;
  Image image() const;
  void start_from(const Image& image);

  std::int64_t operations() const { return operations_; }
  /// Changes one byte of a file as it stands and as it was synced.
  void damage(const std::string& name, std::size_t at);

  // For the functions that SQLite calls.
  enum class Op { open, read, write, sync, truncate, remove, look };
  bool strikes(Op op);
  std::shared_ptr<File> open(const char* name, bool create);
  void remove(const std::string& name, bool durable);
  void keep_names(File& file);
  bool has(const std::string& name) const { return files_.count(name) != 0; }
  int failure_code(Op op) const;
  bool half_written() const { return !dark_ && failure_ == Failure::full; }
  std::mt19937_64& random() { return random_; }
  sqlite3_vfs* below() { return below_; }

 private:
  using Folder = std::map<std::string, std::shared_ptr<File>>;
  bool chance() { return (random_() & 1u) != 0; }
  void survive(File& file);

  sqlite3_vfs vfs_{};
  sqlite3_vfs* below_;  ///< for time and sleep
  std::mt19937_64 random_;
  Folder files_, durable_;  ///< as the program sees the folder; as the disk has it for sure
  std::int64_t operations_{0}, cut_at_{0}, fail_at_{0}, countable_{0};
  Failure failure_{Failure::io};
  bool lasting_{false}, fired_{false}, dark_{false};
};

}  // namespace jigwright::room
