#include "db/keeper.hpp"

#include "db/sqlite.hpp"

namespace jigwright {
namespace {

constexpr auto wait_after_failure = std::chrono::minutes(10);

}  // namespace

Keeper::~Keeper() {
  stop_ = true;
  if (thread_.joinable()) thread_.join();
}

void Keeper::tend(std::int64_t now_us) {
  if (plan_.folder.empty()) return;
  copy();
  if (running_) return;
  const auto now = std::chrono::steady_clock::now();
  if (not_before_ && now < *not_before_) return;
  if (damage() || !backup_due(plan_, now_us)) return;
  not_before_ = now + wait_after_failure;  // a backup that was made makes the next one not due
  begin_backup(now_us);
}

void Keeper::copy() {
  const auto copied = copies_.catch_up();
  if (!copied && !copies_failed_) tell(describe(copied.error()));
  copies_failed_ = !copied.ok();
}

void Keeper::begin_backup(std::int64_t now_us) {
  if (thread_.joinable()) thread_.join();
  running_ = true;
  thread_ = std::thread([this, now_us, store = database_.path()] {
    const auto made = make_backup(store, plan_, now_us, &stop_);
    if (!made && !stop_) tell(describe(made.error()));
    if (made.ok() && !made.value().audit.whole()) {
      const Error found{Error::Kind::store, "the store is damaged: " + sentence(made.value().audit.differences.front()),
                        store, restore_advice};
      tell(describe(found));
      const std::lock_guard lock(mutex_);
      damage_ = found;
    }
    running_ = false;
  });
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
