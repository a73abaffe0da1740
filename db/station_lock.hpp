// One program drives a station at a time: it holds a lock on a file beside the store for as long as it lives, and the
// system takes the lock back however the program ends. Other programs may write to the store meanwhile. Any thread.
#pragma once
#include <sys/types.h>

#include <string>

#include "base/error.hpp"

namespace jigwright {

class StationLock {
 public:
  StationLock() = default;
  StationLock(StationLock&& other) noexcept;
  StationLock& operator=(StationLock&& other) noexcept;
  ~StationLock();

  /// Error kind store when another program drives the station, or the file can't be made. A store that is not on a disk
  /// (":memory:") needs none.
  static Result<StationLock> take(const std::string& store_path, const std::string& station);
  /// All stations at once, also those that the store has not yet and whether or not it is there: nobody begins to drive
  /// one meanwhile. Errors as above.
  static Result<StationLock> take_all(const std::string& store_path);

 private:
  static Result<StationLock> lock(const std::string& store_path, off_t start, off_t length, Error taken);
  int file_{-1};
};

}  // namespace jigwright
