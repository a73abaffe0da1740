#include "db/station_lock.hpp"

#include <fcntl.h>
#include <sys/stat.h>
#include <unistd.h>

#include <cerrno>
#include <cstring>
#include <utility>

#include "db/digest.hpp"

namespace jigwright {
namespace {

/// The byte of the file that stands for the station, by its name.
off_t byte_of(const std::string& station) {
  const std::string digest = sha256(station);
  off_t out = 0;
  for (int i = 0; i < 4; ++i) out = out << 8 | static_cast<unsigned char>(digest[static_cast<std::size_t>(i)]);
  return out;
}

}  // namespace

StationLock::StationLock(StationLock&& other) noexcept : file_(std::exchange(other.file_, -1)) {}

StationLock& StationLock::operator=(StationLock&& other) noexcept {
  std::swap(file_, other.file_);
  return *this;
}

StationLock::~StationLock() {
  if (file_ >= 0) ::close(file_);
}

Result<StationLock> StationLock::take(const std::string& store_path, const std::string& station) {
  struct stat status {};
  if (::stat(store_path.c_str(), &status) != 0 || !S_ISREG(status.st_mode)) return StationLock();
  return lock(store_path, byte_of(station), 1,
              {Error::Kind::store, "another program drives station " + station + " now", store_path,
               "end that one first; a second jig needs a station name of its own"});
}

Result<StationLock> StationLock::take_all(const std::string& store_path) {
  return lock(store_path, 0, 0,
              {Error::Kind::store, "a program drives a station of this store now", store_path, "end it first"});
}

/// The kernel's lock on an open file, not a process's: it ends with the file, and SQLite's own are not touched.
/// @param length  0 = to the end
Result<StationLock> StationLock::lock(const std::string& store_path, off_t start, off_t length, Error taken) {
  StationLock out;
  const std::string path = store_path + "-stations";
  out.file_ = ::open(path.c_str(), O_RDWR | O_CREAT | O_CLOEXEC, 0666);
  if (out.file_ < 0)
    return Error{Error::Kind::store, std::string("the stations' lock can't be made: ") + std::strerror(errno), path,
                 "give yourself the right to write this file and its folder"};
  struct flock wanted {};
  wanted.l_type = F_WRLCK;
  wanted.l_whence = SEEK_SET;
  wanted.l_start = start;
  wanted.l_len = length;
  if (::fcntl(out.file_, F_OFD_SETLK, &wanted) == 0) return out;
  if (errno != EAGAIN && errno != EACCES) return out;  // a disk without locks
  if (::fcntl(out.file_, F_OFD_GETLK, &wanted) == 0 && wanted.l_type == F_WRLCK && wanted.l_start == 0 &&
      wanted.l_len == 0)
    return Error{Error::Kind::store, "this store is being restored now", store_path, "wait until that is done"};
  return taken;
}

}  // namespace jigwright
