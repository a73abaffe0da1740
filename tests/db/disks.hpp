// Disks and rights that fail, for the store's tests: root may write everything, so it becomes nobody for a while.
#pragma once
#include <sys/mount.h>
#include <sys/resource.h>
#include <unistd.h>

#include <csignal>
#include <cstdlib>
#include <string>

#include "tests/db/room.hpp"

namespace jigwright::room {

/// Files with rights like others' do.
class Unprivileged {
 public:
  Unprivileged() : was_(geteuid()) {
    if (was_ == 0) REQUIRE(seteuid(65534) == 0);
  }
  ~Unprivileged() {
    if (was_ == 0 && seteuid(0) != 0) std::abort();
  }
  Unprivileged(const Unprivileged&) = delete;
  Unprivileged& operator=(const Unprivileged&) = delete;

 private:
  uid_t was_;
};

/// A disk of its own of some megabytes, where this process may mount one.
class SmallDisk {
 public:
  explicit SmallDisk(const std::string& options) {
    mounted_ = mount("tmpfs", folder_.path.c_str(), "tmpfs", 0, options.c_str()) == 0;
    if (!mounted_) MESSAGE("skipped: a small disk needs root and the right to mount");
  }
  ~SmallDisk() {
    if (mounted_) umount2(folder_.path.c_str(), MNT_DETACH);
  }
  SmallDisk(const SmallDisk&) = delete;
  SmallDisk& operator=(const SmallDisk&) = delete;
  bool mounted() const { return mounted_; }
  bool make_read_only() { return mount("", folder_.path.c_str(), "", MS_REMOUNT | MS_RDONLY, "") == 0; }
  std::string file(const std::string& name) const { return folder_.file(name); }

 private:
  TempFolder folder_;
  bool mounted_;
};

/// No file of this process grows beyond so many bytes: a quota that strikes in the middle of a write.
class FileLimit {
 public:
  explicit FileLimit(rlim_t bytes) : before_(std::signal(SIGXFSZ, SIG_IGN)) {
    REQUIRE(getrlimit(RLIMIT_FSIZE, &was_) == 0);
    rlimit limit = was_;
    limit.rlim_cur = bytes;
    REQUIRE(setrlimit(RLIMIT_FSIZE, &limit) == 0);
  }
  ~FileLimit() {
    if (setrlimit(RLIMIT_FSIZE, &was_) != 0) std::abort();
    std::signal(SIGXFSZ, before_);
  }
  FileLimit(const FileLimit&) = delete;
  FileLimit& operator=(const FileLimit&) = delete;

 private:
  rlimit was_{};
  void (*before_)(int);
};

}  // namespace jigwright::room
