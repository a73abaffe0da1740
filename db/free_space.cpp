#include "db/free_space.hpp"

#include <fcntl.h>
#include <fmt/format.h>
#include <sys/statvfs.h>
#include <unistd.h>

#include <cerrno>
#include <filesystem>

namespace jigwright {
namespace {

namespace fs = std::filesystem;

Error error(std::string what, const fs::path& where, std::string to_do) {
  return {Error::Kind::store, std::move(what), where.string(), std::move(to_do)};
}

/// Judged by the effective user, as open() is.
bool may(const fs::path& path, int how) {
  return ::faccessat(AT_FDCWD, path.c_str(), how, AT_EACCESS) == 0;
}

Error refusal(const fs::path& path, const char* kind) {
  if (errno == EROFS)
    return error("this disk can only be read, so nothing can be recorded", path,
                 "make the disk writable, or name a store on another one with --store");
  return error(fmt::format("this {} may not be written by you, so nothing can be recorded", kind), path,
               fmt::format("give yourself the right to write this {}, or name another store with --store", kind));
}

double megabytes(std::uint64_t bytes) {
  return static_cast<double>(bytes) / 1e6;
}

}  // namespace

std::optional<std::uint64_t> space_left_bytes(const std::string& path) {
  struct statvfs disk {};
  if (::statvfs(path.c_str(), &disk) != 0) return std::nullopt;
  return std::uint64_t{disk.f_bavail} * disk.f_frsize;
}

Result<Done> check_space(const std::string& path, std::optional<std::uint64_t> left_bytes) {
  if (!left_bytes || *left_bytes >= space_for_trial_bytes) return Done{};
  return error(fmt::format("the store's disk is nearly full: {:.1f} MB are left, and {:.0f} MB must be free before a "
                           "trial begins",
                           megabytes(*left_bytes), megabytes(space_for_trial_bytes)),
               path, "free space on this disk, or name a store on another one with --store; then try the board again");
}

Result<Done> check_writable(const std::string& path) {
  if (path.empty() || path == ":memory:") return Done{};
  std::error_code none;
  fs::path file = fs::canonical(path, none);  // where a link leads, its companions stand
  if (none) file = fs::absolute(path);
  const fs::path folder = file.parent_path();
  if (!fs::is_directory(folder, none)) return error("this folder does not exist", folder, "make it, or check the path");
  if (fs::is_directory(file, none)) return error("this is a folder, not a store", file, "name a file in it");
  for (const char* companion : {"", "-wal", "-shm"}) {
    const fs::path beside = file.string() + companion;
    if (fs::exists(beside, none) && !may(beside, W_OK)) return refusal(beside, "file");
  }
  if (!may(folder, W_OK | X_OK)) return refusal(folder, "folder");
  return Done{};
}

}  // namespace jigwright
