#include "db/sqlite.hpp"

#include <sqlite3.h>

#include <cmath>
#include <limits>

namespace jigwright {
namespace {

std::string advice(int code) {
  switch (code & 0xff) {
    case SQLITE_FULL:
      return "free space on the disk, then repeat";
    case SQLITE_BUSY:
    case SQLITE_LOCKED:
      return "another program is writing to the store: wait for it, then repeat";
    case SQLITE_READONLY:
    case SQLITE_PERM:
    case SQLITE_CANTOPEN:
      return "check the path and its permissions (the folder must be writable too)";
    case SQLITE_IOERR:
      return "check the disk and its connection, then repeat";
    case SQLITE_CORRUPT:
      return "the file is damaged: put it aside, and restore the last backup with \"jigwright restore\"";
    case SQLITE_NOTADB:
      return "name a store that this program made, or a path where none stands yet";
    default:
      return "keep a copy of the store and report this";
  }
}

}  // namespace

Error sqlite_error(int code, const std::string& reason, const std::string& path) {
  if ((code & 0xff) == SQLITE_NOTADB) return {Error::Kind::store, "this file is not a store", path, advice(code)};
  return {Error::Kind::store, "the store can't be used: " + reason, path, advice(code)};
}

Query::Query(Query&& other) noexcept : database_(other.database_), statement_(other.statement_) {
  other.statement_ = nullptr;
}

Query::~Query() {
  if (statement_ == nullptr) return;
  sqlite3_reset(statement_);
  sqlite3_clear_bindings(statement_);
}

bool Query::next() {
  if (statement_ == nullptr || database_->failed()) return false;
  const int code = sqlite3_step(statement_);
  if (code == SQLITE_ROW) return true;
  if (code != SQLITE_DONE) database_->fail(code);
  return false;
}

Query::Type Query::type(int column) const {
  switch (sqlite3_column_type(statement_, column)) {
    case SQLITE_INTEGER:
      return Type::integer;
    case SQLITE_FLOAT:
      return Type::real;
    case SQLITE_TEXT:
      return Type::text;
    case SQLITE_BLOB:
      return Type::blob;
    default:
      return Type::null;
  }
}
bool Query::null(int column) const {
  return sqlite3_column_type(statement_, column) == SQLITE_NULL;
}
std::int64_t Query::integer(int column) const {
  return sqlite3_column_int64(statement_, column);
}
double Query::real(int column) const {
  return null(column) ? std::numeric_limits<double>::quiet_NaN() : sqlite3_column_double(statement_, column);
}
std::string_view Query::view(int column) const {
  const void* bytes = sqlite3_column_blob(statement_, column);
  const int length = sqlite3_column_bytes(statement_, column);
  return bytes == nullptr ? std::string_view()
                          : std::string_view(static_cast<const char*>(bytes), static_cast<size_t>(length));
}
std::string Query::text(int column) const {
  return std::string(view(column));
}
std::optional<double> Query::maybe_real(int column) const {
  return null(column) ? std::nullopt : std::optional(real(column));
}
std::optional<std::int64_t> Query::maybe_integer(int column) const {
  return null(column) ? std::nullopt : std::optional(integer(column));
}

void Query::check(int code) {
  if (code != SQLITE_OK) database_->fail(code);
}
void Query::bind(int at, std::int64_t value) {
  if (statement_ != nullptr) check(sqlite3_bind_int64(statement_, at, value));
}
void Query::bind(int at, double value) {
  if (std::isnan(value)) return bind(at, std::nullopt);
  if (statement_ != nullptr) check(sqlite3_bind_double(statement_, at, value));
}
void Query::bind(int at, std::string_view value) {
  const char* text = value.data() == nullptr ? "" : value.data();
  if (statement_ != nullptr) check(sqlite3_bind_text64(statement_, at, text, value.size(), SQLITE_STATIC, SQLITE_UTF8));
}
void Query::bind(int at, Blob value) {
  const char* bytes = value.bytes.data() == nullptr ? "" : value.bytes.data();
  if (statement_ != nullptr) check(sqlite3_bind_blob64(statement_, at, bytes, value.bytes.size(), SQLITE_STATIC));
}
void Query::bind(int at, std::nullopt_t) {
  if (statement_ != nullptr) check(sqlite3_bind_null(statement_, at));
}

Result<std::unique_ptr<Database>> Database::open(const std::string& path, Access access, bool create, int busy_ms) {
  int flags = SQLITE_OPEN_NOMUTEX | (access == Access::write ? SQLITE_OPEN_READWRITE : SQLITE_OPEN_READONLY);
  if (create && access == Access::write) flags |= SQLITE_OPEN_CREATE;
  sqlite3* handle = nullptr;
  const int code = sqlite3_open_v2(path.c_str(), &handle, flags, nullptr);
  if (code != SQLITE_OK) {
    const std::string reason = handle == nullptr ? "out of memory" : sqlite3_errmsg(handle);
    sqlite3_close_v2(handle);
    return sqlite_error(code, reason, path);
  }
  sqlite3_extended_result_codes(handle, 1);
  sqlite3_busy_timeout(handle, busy_ms);
  return std::unique_ptr<Database>(new Database(path, handle));
}

Database::~Database() {
  for (const auto& [text, statement] : statements_) sqlite3_finalize(statement);
  sqlite3_close_v2(handle_);
}

sqlite3_stmt* Database::prepared(const char* text) {
  if (failed()) return nullptr;
  if (const auto found = statements_.find(text); found != statements_.end()) return found->second;
  sqlite3_stmt* statement = nullptr;
  const int code = sqlite3_prepare_v3(handle_, text, -1, SQLITE_PREPARE_PERSISTENT, &statement, nullptr);
  if (code != SQLITE_OK) {
    fail(code);
    return nullptr;
  }
  statements_.emplace(text, statement);
  return statement;
}

void Database::script(const char* text) {
  if (failed()) return;
  const int code = sqlite3_exec(handle_, text, nullptr, nullptr, nullptr);
  if (code != SQLITE_OK) fail(code);
}

std::int64_t Database::last_id() const {
  return sqlite3_last_insert_rowid(handle_);
}
std::int64_t Database::changes() const {
  return sqlite3_changes64(handle_);
}

void Database::fail(Error error) {
  if (failed()) return;
  error_ = std::move(error);
  refused_ = true;
}
void Database::fail(int code) {
  if (failed()) return;
  error_ = sqlite_error(code, sqlite3_errmsg(handle_), path_);
  const int primary = code & 0xff;
  refused_ = primary == SQLITE_CONSTRAINT || primary == SQLITE_MISMATCH || primary == SQLITE_TOOBIG;
}

/// The path leads to another file by now, or to none.
bool Database::moved() {
  int moved = 0;
  return sqlite3_file_control(handle_, "main", SQLITE_FCNTL_HAS_MOVED, &moved) == SQLITE_OK && moved != 0;
}

void Database::roll_back() {
  // An error of SQLite may have rolled back already; what matters is that no transaction is open afterwards.
  if (sqlite3_get_autocommit(handle_) == 0) sqlite3_exec(handle_, "ROLLBACK", nullptr, nullptr, nullptr);
}

Transaction::Transaction(Database& database, Kind kind) : database_(database), open_(true) {
  database_.clear_error();
  database_.script(kind == Kind::write ? "BEGIN IMMEDIATE" : "BEGIN");
  if (kind == Kind::write && !database_.failed() && database_.moved())
    database_.fail({Error::Kind::store,
                    "the store's file was moved, replaced or removed while this program had it open", database_.path(),
                    "end this program and start it again; what it recorded is in the moved file"});
}

Transaction::~Transaction() {
  if (open_) database_.roll_back();
  database_.clear_error();
}

Result<Done> Transaction::commit() {
  database_.script("COMMIT");
  open_ = false;
  if (!database_.failed()) return Done{};
  database_.roll_back();
  Error error = database_.error();
  database_.clear_error();
  return error;
}

}  // namespace jigwright
