#include "sequencer/leases.hpp"

#include <algorithm>
#include <boost/asio/async_result.hpp>
#include <boost/asio/post.hpp>
#include <boost/asio/use_awaitable.hpp>

namespace jigwright {

std::uint32_t Leases::busy() const {
  std::uint32_t all = 0;
  for (const Held& h : held_) all |= h.resources;
  return all;
}

std::uint32_t Leases::held(int nest) const {
  for (const Held& h : held_)
    if (h.nest == nest) return h.resources;
  return 0;
}

void Leases::take(int nest, std::uint32_t resources) {
  for (Held& h : held_) {
    if (h.nest != nest) continue;
    h.resources |= resources;
    return;
  }
  held_.push_back({nest, resources});
}

bool Leases::wanted(int nest) const {
  const std::uint32_t mine = held(nest);
  return std::any_of(waiters_.begin(), waiters_.end(),
                     [&](const Waiter& w) { return w.waiting.nest != nest && (w.waiting.resources & mine) != 0; });
}

Task<bool> Leases::acquire(int nest, std::uint32_t resources) {
  const std::uint32_t missing = resources & ~held(nest);
  if (missing == 0) co_return true;
  if (waiters_.empty() && (missing & busy()) == 0) {
    take(nest, missing);
    co_return true;
  }
  using Await = asio::use_awaitable_t<Exec>;
  co_return co_await asio::async_initiate<const Await, void(bool)>(
      [this, nest, missing](auto handler) {
        // std::function wants a copyable callable; the handler can only move.
        auto kept = std::make_shared<decltype(handler)>(std::move(handler));
        auto wake = [this, kept](bool got) { asio::post(*io_, [kept, got]() mutable { std::move (*kept)(got); }); };
        waiters_.push_back({{nest, missing, asked_++}, std::move(wake)});
        grant();
      },
      Await{});
}

void Leases::grant() {
  for (;;) {
    std::vector<Waiting> waiting;
    for (const Waiter& w : waiters_) waiting.push_back(w.waiting);
    const auto next = pick(waiting, busy());
    if (!next) return;
    Waiter chosen = std::move(waiters_[*next]);
    waiters_.erase(waiters_.begin() + static_cast<std::ptrdiff_t>(*next));
    take(chosen.waiting.nest, chosen.waiting.resources);
    chosen.wake(true);
  }
}

void Leases::release(int nest) {
  std::erase_if(held_, [&](const Held& h) { return h.nest == nest; });
  if (!waiters_.empty()) grant();
}

void Leases::cancel_all() {
  std::vector<Waiter> all = std::move(waiters_);
  waiters_.clear();
  for (Waiter& w : all) w.wake(false);
}

}  // namespace jigwright
