#include "db/store.hpp"

#include <sys/stat.h>

#include <chrono>

#include "db/audit.hpp"
#include "db/free_space.hpp"
#include "db/keeper.hpp"
#include "db/migrate.hpp"
#include "db/schema.hpp"
#include "db/trial_writer.hpp"

namespace jigwright {
namespace {

constexpr int built_at_once = 4;  ///< stretches after a trial: well below what the next board's handling takes

bool missing(const std::string& path) {
  struct stat status {};
  return path != ":memory:" && ::stat(path.c_str(), &status) != 0;
}

std::int64_t utc_us() {
  using namespace std::chrono;
  return duration_cast<microseconds>(system_clock::now().time_since_epoch()).count();
}

}  // namespace

Store::Store(std::unique_ptr<Database> database, const BackupPlan& backups)
    : database_(std::move(database)),
      writer_(std::make_unique<TrialWriter>(*database_, uuids_)),
      columns_(*database_),
      keeper_(std::make_unique<Keeper>(*database_, backups)) {}

Store::~Store() = default;

Result<std::unique_ptr<Store>> Store::open(const std::string& path, const StoreOptions& options) {
  const bool write = options.access == StoreOptions::Access::write;
  const bool create = write && options.create;
  if (!create && missing(path))
    return Error{Error::Kind::store, "there is no store here", path, "check the path, or try a board first"};
  const std::int64_t now_us = utc_us();
  if (const auto writable = write ? check_writable(path) : Done{}; !writable) return writable.error();
  auto database =
      Database::open(path, write ? Database::Access::write : Database::Access::read, create, options.busy_ms);
  if (!database) return database.error();
  std::unique_ptr<Store> store(new Store(std::move(database.value()), options.backups));
  const Uuid uuid = store->uuids_.next(now_us / 1000);
  const auto layout = settle_schema(*store->database_, create, bytes(uuid));
  if (!layout) return layout.error();
  if (layout.value() == layout_version) return store;
  if (!write) return reopened(path, options);
  const auto notice = migrate(*store->database_, store->uuids_, now_us);
  if (!notice) return notice.error();
  store->notice_ = notice.value();
  return store;
}

/// For reading, once a writer has brought the layout up to date.
Result<std::unique_ptr<Store>> Store::reopened(const std::string& path, StoreOptions options) {
  StoreOptions writing = options;
  writing.access = StoreOptions::Access::write;
  writing.create = false;
  const auto writer = open(path, writing);
  if (!writer) return writer.error();
  auto reader = open(path, options);
  if (reader) reader.value()->notice_ = writer.value()->notice_;
  return reader;
}

Result<Done> Store::drive(const std::string& station, std::int64_t now_us) {
  if (driven_.contains(station)) return Done{};
  auto lock = StationLock::take(database_->path(), station);
  if (!lock) return lock.error();
  const auto report = audit_recent(*database_, station);
  if (!report) return report.error();
  if (!report.value().whole())
    return Error{Error::Kind::store, "the store is damaged: " + sentence(report.value().differences.front()),
                 database_->path(), restore_advice};
  if (const auto closed = writer_->close_cut_short(station, now_us); !closed) return closed.error();
  driven_.emplace(station, std::move(lock.value()));
  return Done{};
}

Result<Done> Store::take_station(const std::string& station) {
  return drive(station, utc_us());
}

Result<OpenTrial> Store::begin_trial(const TrialStart& start) {
  if (const auto damage = keeper_->damage()) return *damage;
  if (const auto driven = drive(start.station, start.at_us); !driven) return driven.error();
  if (const auto room = check_space(database_->path()); !room) return room.error();
  return writer_->begin(start);
}

Result<Done> Store::finish_trial(const OpenTrial& open, const TrialEnd& end) {
  return writer_->finish(open, end);
}

void Store::upkeep() {
  keeper_->tend(utc_us());
  static_cast<void>(columns_.upkeep(built_at_once));
}

void Store::finish_upkeep() {
  keeper_->finish();
}

std::vector<std::string> Store::take_news() {
  return keeper_->take_news();
}

Result<std::vector<EnteredFile>> Store::enter(const std::vector<std::shared_ptr<const SourceText>>& sources,
                                              std::int64_t now_us, Faults& faults, const EnteredBy& by) {
  return enter_lists(*database_, uuids_, sources, now_us, faults, by);
}

Result<SerialTrace> Store::trace_serial(const std::string& serial) {
  return jigwright::trace_serial(*database_, serial);
}

Result<ReelTrace> Store::trace_reel(const std::string& reel) {
  return jigwright::trace_reel(*database_, reel);
}

Result<BoardShown> Store::show(const std::string& serial) {
  return show_board(*database_, serial);
}

}  // namespace jigwright
