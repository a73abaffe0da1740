#include "db/keeper.hpp"

#include "db/sqlite.hpp"

namespace jigwright {
namespace {

constexpr auto wait_after_failure = std::chrono::minutes(10);
constexpr auto wait_after_failed_copies = std::chrono::seconds(30);

}  // namespace

Keeper::~Keeper() {
  stop_ = true;
  if (thread_.joinable()) thread_.join();
}

void Keeper::tend(std::int64_t now_us) {
  if (plan_.folder.empty()) return;
  const auto now = std::chrono::steady_clock::now();
  if (!copies_not_before_ || now >= *copies_not_before_) copy();
  if (running_) return;
  if (not_before_ && now < *not_before_) return;
  if (damage() || !backup_due(plan_, now_us)) return;
  not_before_ = now + wait_after_failure;  // a backup that was made makes the next one not due
  begin_backup(now_us);
}

void Keeper::copy() {
  const auto copied = copies_.catch_up();
  if (!copied && copies_.damaged()) damaged(copied.error());
  std::string failed = copied ? std::string() : describe(copied.error());
  if (!failed.empty() && failed != copies_failed_) tell(failed);
  copies_failed_ = std::move(failed);
  copies_not_before_.reset();
  if (!copied) copies_not_before_ = std::chrono::steady_clock::now() + wait_after_failed_copies;
}

void Keeper::begin_backup(std::int64_t now_us) {
  if (thread_.joinable()) thread_.join();
  running_ = true;
  thread_ = std::thread([this, now_us, store = database_.path()] {
    end_backup(make_backup(store, plan_, now_us, &stop_));
    running_ = false;
  });
}

/// On the backup's thread.
void Keeper::end_backup(const Result<BackupMade>& made) {
  std::string failed;
  if (!made && !stop_) failed = describe(made.error());
  if (made && !made.value().audit.whole()) {
    const Error found{Error::Kind::store, "the store is damaged: " + sentence(made.value().audit.differences.front()),
                      database_.path(), restore_advice};
    failed = describe(found);
    damaged(found);
  }
  const std::lock_guard lock(mutex_);
  if (!failed.empty() && failed != backup_failed_) news_.push_back(failed);
  backup_failed_ = std::move(failed);
}

void Keeper::damaged(const Error& how) {
  const std::lock_guard lock(mutex_);
  if (!damage_) damage_ = how;
}

void Keeper::finish() {
  if (thread_.joinable()) thread_.join();
  if (!plan_.folder.empty()) copy();
}

std::optional<Error> Keeper::damage() const {
  const std::lock_guard lock(mutex_);
  return damage_;
}

std::vector<std::string> Keeper::take_news() {
  const std::lock_guard lock(mutex_);
  return std::exchange(news_, {});
}

void Keeper::tell(std::string news) {
  const std::lock_guard lock(mutex_);
  news_.push_back(std::move(news));
}

}  // namespace jigwright
