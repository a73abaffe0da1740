// What a store can be measured against: a bare SQLite program that writes the same rows in the same transactions to a
// file of the same layout, with nothing looked up, judged, hashed or checked. It reads the rows from a store that has
// them. For the benchmark; one thread.
#pragma once
#include <sqlite3.h>

#include <cstdint>
#include <memory>
#include <string>
#include <vector>

namespace jigwright::room {

/// Pages that a connection's commits put into the write-ahead log. Copies the log into the file at 1,000 pages, as
/// SQLite does by itself.
class WalPages {
 public:
  explicit WalPages(sqlite3* handle);
  std::int64_t total() const { return total_; }

 private:
  static int committed(void* self, sqlite3* handle, const char* name, int pages);
  std::int64_t total_{0};
  int last_{0};
};

class BareStore {
 public:
  /// Makes `path` with the layout of the store at `from` and every row of it that is not of a trial.
  BareStore(const std::string& path, const std::string& from);
  ~BareStore();
  BareStore(const BareStore&) = delete;
  BareStore& operator=(const BareStore&) = delete;

  /// Reads the trials with these ids, both inclusive, into memory.
  void load(std::int64_t first, std::int64_t last);
  /// Writes what was loaded, each trial in two durable transactions; returns the seconds that took.
  double log();
  /// Seconds for so many transactions of one changed row each: what the disk asks for at least.
  double bare_commits_s(int count);
  bool sound() const { return sound_; }

 private:
  using Value = std::unique_ptr<sqlite3_value, void (*)(sqlite3_value*)>;
  using Row = std::vector<Value>;
  struct Trial {
    Row begun, ended;
    std::vector<Row> findings, readings, journal;
  };
  void copy_table(const std::string& name);
  std::vector<Row> rows(const std::string& sql);
  sqlite3_stmt* prepare(sqlite3* handle, const std::string& sql);
  void insert(sqlite3_stmt* statement, const Row& row);
  void run(const char* sql);
  void expect(int code, int wanted);

  sqlite3* from_{nullptr};
  sqlite3* to_{nullptr};
  sqlite3_stmt* insert_trial_{nullptr};
  sqlite3_stmt* end_trial_{nullptr};
  sqlite3_stmt* insert_finding_{nullptr};
  sqlite3_stmt* insert_readings_{nullptr};
  sqlite3_stmt* insert_journal_{nullptr};
  std::vector<Trial> trials_;
  bool journal_{false};
  bool sound_{true};
};

}  // namespace jigwright::room
