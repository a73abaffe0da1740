// Who holds the shared instruments. A nest keeps its lease from setting to setting until another nest waits for it.
// One thread: the io_context's.
#pragma once
#include <cstdint>
#include <functional>
#include <memory>
#include <vector>

#include "fixtures/clock.hpp"
#include "sequencer/arrange.hpp"

namespace jigwright {

class Leases {
 public:
  explicit Leases(asio::io_context& io) : io_(&io) {}

  /// Suspends until all of these are this nest's alone. False when cancel_all() woke it without them.
  Task<bool> acquire(int nest, std::uint32_t resources);
  void release(int nest);
  std::uint32_t held(int nest) const;
  /// Nobody holds any of these.
  bool free(std::uint32_t resources) const { return (busy() & resources) == 0; }
  /// Another nest waits for something that this one holds.
  bool wanted(int nest) const;
  /// Everyone who waits goes away empty-handed.
  void cancel_all();

 private:
  struct Held {
    int nest;
    std::uint32_t resources;
  };
  struct Waiter {
    Waiting waiting;
    std::function<void(bool)> wake;
  };
  std::uint32_t busy() const;
  void take(int nest, std::uint32_t resources);
  void grant();

  asio::io_context* io_;
  std::vector<Held> held_;
  std::vector<Waiter> waiters_;
  std::uint64_t asked_{0};
};

}  // namespace jigwright
