// Small handles over SQLite, for db/'s own files. A database keeps its prepared statements; a query rewinds its
// statement when it goes. The first error sticks: every later call is then a harmless no-op, and commit() or error()
// tells of it, so that a transaction reads as straight text. One thread at a time.
#pragma once
#include <cstdint>
#include <memory>
#include <optional>
#include <string>
#include <string_view>
#include <unordered_map>

#include "base/error.hpp"

struct sqlite3;
struct sqlite3_stmt;

namespace jigwright {

/// Bytes to bind; the text of a std::string_view is bound as TEXT.
struct Blob {
  std::string_view bytes;
};

/// SQL as a literal: its address is the key under which the prepared statement is kept.
class Sql {
 public:
  consteval Sql(const char* literal) : text_(literal) {}
  const char* text() const { return text_; }

 private:
  const char* text_;
};

class Database;

/// One run of a prepared statement. Columns count from 0.
class Query {
 public:
  Query(Query&& other) noexcept;
  Query(const Query&) = delete;
  Query& operator=(const Query&) = delete;
  Query& operator=(Query&&) = delete;
  ~Query();

  /// Steps to the next row; false at the end or once the database has failed.
  bool next();
  enum class Type { null, integer, real, text, blob };
  Type type(int column) const;
  bool null(int column) const;
  std::int64_t integer(int column) const;   ///< 0 for NULL
  double real(int column) const;            ///< NaN for NULL
  std::string text(int column) const;       ///< empty for NULL; also the bytes of a BLOB
  std::string_view view(int column) const;  ///< the same until the next step, not copied
  std::optional<double> maybe_real(int column) const;
  std::optional<std::int64_t> maybe_integer(int column) const;

 private:
  friend class Database;
  Query(Database& database, sqlite3_stmt* statement) : database_(&database), statement_(statement) {}
  void bind(int at, std::int64_t value);
  void bind(int at, int value) { bind(at, std::int64_t{value}); }
  void bind(int at, bool value) { bind(at, std::int64_t{value}); }
  void bind(int at, double value);  ///< NaN as NULL
  void bind(int at, std::string_view value);
  void bind(int at, const std::string& value) { bind(at, std::string_view(value)); }
  void bind(int at, const char* value) { bind(at, std::string_view(value)); }
  void bind(int at, Blob value);
  void bind(int at, std::nullopt_t);
  template <class T>
  void bind(int at, const std::optional<T>& value) {
    value ? bind(at, *value) : bind(at, std::nullopt);
  }
  void check(int code);

  Database* database_;
  sqlite3_stmt* statement_;
};

class Database {
 public:
  enum class Access { read, write };

  /// Opens the file; `create` makes one that is missing. Error kind store. ":memory:" is a store of its own.
  static Result<std::unique_ptr<Database>> open(const std::string& path, Access access, bool create, int busy_ms);
  ~Database();
  Database(const Database&) = delete;
  Database& operator=(const Database&) = delete;

  /// Arguments are bound in order; texts must outlive the query.
  template <class... A>
  Query query(Sql sql, const A&... arguments) {
    Query q(*this, prepared(sql.text()));
    int at = 0;
    (q.bind(++at, arguments), ...);
    return q;
  }
  template <class... A>
  void run(Sql sql, const A&... arguments) {
    Query q = query(sql, arguments...);
    while (q.next()) {
    }
  }
  /// The first row's first column, if there is a row.
  template <class... A>
  std::optional<std::int64_t> first(Sql sql, const A&... arguments) {
    Query q = query(sql, arguments...);
    if (!q.next()) return std::nullopt;
    return q.integer(0);
  }
  /// Several statements at once, not kept.
  void script(const char* text);

  std::int64_t last_id() const;
  std::int64_t changes() const;
  const std::string& path() const { return path_; }
  sqlite3* handle() { return handle_; }  ///< for tests that look at the statements

  bool failed() const { return error_.has_value(); }
  const Error& error() const { return *error_; }
  /// The error is of the values, which layout or caller do not take, and not of the disk.
  bool refused_values() const { return failed() && refused_; }
  void fail(Error error);
  void clear_error() {
    error_.reset();
    refused_ = false;
  }
  /// A value, or the error that stuck.
  template <class T>
  Result<T> result(T value) {
    if (failed()) return *error_;
    return value;
  }

 private:
  friend class Query;
  friend class Transaction;
  Database(std::string path, sqlite3* handle) : path_(std::move(path)), handle_(handle) {}
  sqlite3_stmt* prepared(const char* text);
  void fail(int code);
  bool moved();
  void roll_back();

  std::string path_;
  sqlite3* handle_;
  std::unordered_map<const char*, sqlite3_stmt*> statements_;
  std::optional<Error> error_;
  bool refused_{false};
};

/// What SQLite said, in an Error with what to do about it.
Error sqlite_error(int code, const std::string& reason, const std::string& path);

/// BEGIN IMMEDIATE for writing, BEGIN for reading; rolled back unless committed. An error ends with its transaction.
/// Nothing is written into a file that was moved, replaced or removed since it was opened.
class Transaction {
 public:
  enum class Kind { write, read };
  Transaction(Database& database, Kind kind);
  ~Transaction();
  Transaction(const Transaction&) = delete;
  Transaction& operator=(const Transaction&) = delete;

  /// Durable at return; or the first error, and nothing of the transaction stands.
  Result<Done> commit();

 private:
  Database& database_;
  bool open_;
};

}  // namespace jigwright
