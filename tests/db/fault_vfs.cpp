#include "tests/db/fault_vfs.hpp"

#include <algorithm>
#include <cstring>
#include <new>

namespace jigwright::room {

struct FaultDisk::File {
  struct Change {
    std::size_t at;
    std::string bytes;
    bool truncates;  ///< to `at` bytes
  };
  std::string name;
  std::string now, synced;
  std::vector<Change> pending;  ///< since the last sync
  std::vector<std::unique_ptr<std::uint64_t[]>> shared;
  bool syncs_folder{false};  ///< its next sync is one of the folder too

  static void apply(std::string& image, const Change& change) {
    if (change.truncates) return image.resize(std::min(image.size(), change.at));
    if (image.size() < change.at + change.bytes.size()) image.resize(change.at + change.bytes.size());
    image.replace(change.at, change.bytes.size(), change.bytes);
  }
  void change(Change change) {
    apply(now, change);
    pending.push_back(std::move(change));
  }
  void sync() {
    for (const Change& change : pending) apply(synced, change);
    pending.clear();
  }
};

namespace {

constexpr std::size_t sector = 512;

struct Handle {
  sqlite3_file base;
  FaultDisk* disk;
  std::shared_ptr<FaultDisk::File> file;
  bool temporary;
};

Handle& handle(sqlite3_file* file) {
  return *reinterpret_cast<Handle*>(file);
}
FaultDisk& disk(sqlite3_vfs* vfs) {
  return *static_cast<FaultDisk*>(vfs->pAppData);
}
using Op = FaultDisk::Op;

int file_close(sqlite3_file* f) {
  handle(f).~Handle();
  return SQLITE_OK;
}

int file_read(sqlite3_file* f, void* out, int length, sqlite3_int64 at) {
  Handle& h = handle(f);
  if (h.disk->strikes(Op::read)) return h.disk->failure_code(Op::read);
  const std::string& bytes = h.file->now;
  const auto begin = std::min(bytes.size(), static_cast<std::size_t>(at));
  const auto wanted = static_cast<std::size_t>(length);
  const auto found = std::min(wanted, bytes.size() - begin);
  if (found > 0) std::memcpy(out, bytes.data() + begin, found);
  if (found < wanted) std::memset(static_cast<char*>(out) + found, 0, wanted - found);
  return found < wanted ? SQLITE_IOERR_SHORT_READ : SQLITE_OK;
}

int file_write(sqlite3_file* f, const void* bytes, int length, sqlite3_int64 at) {
  Handle& h = handle(f);
  std::string text(static_cast<const char*>(bytes), static_cast<std::size_t>(length));
  const bool struck = h.disk->strikes(Op::write);
  if (struck && h.disk->half_written()) text.resize(text.size() / 2);
  // A write that was under way when the power went may be on the disk.
  if (!struck || h.disk->dark() || h.disk->half_written())
    h.file->change({static_cast<std::size_t>(at), std::move(text), false});
  return struck ? h.disk->failure_code(Op::write) : SQLITE_OK;
}

int file_truncate(sqlite3_file* f, sqlite3_int64 size) {
  Handle& h = handle(f);
  if (h.disk->strikes(Op::truncate)) return h.disk->failure_code(Op::truncate);
  h.file->change({static_cast<std::size_t>(size), {}, true});
  return SQLITE_OK;
}

int file_sync(sqlite3_file* f, int) {
  Handle& h = handle(f);
  if (h.disk->strikes(Op::sync)) {
    if (!h.disk->dark()) h.file->pending.clear();  // never to be synced
    return h.disk->failure_code(Op::sync);
  }
  h.file->sync();
  h.disk->keep_names(*h.file);
  return SQLITE_OK;
}

int file_size(sqlite3_file* f, sqlite3_int64* size) {
  Handle& h = handle(f);
  if (h.disk->strikes(Op::look)) return SQLITE_IOERR_FSTAT;
  *size = static_cast<sqlite3_int64>(h.file->now.size());
  return SQLITE_OK;
}

int file_lock(sqlite3_file*, int) {
  return SQLITE_OK;
}
int file_reserved(sqlite3_file*, int* out) {
  *out = 0;
  return SQLITE_OK;
}
int file_control(sqlite3_file*, int, void*) {
  return SQLITE_NOTFOUND;
}
int file_sector_size(sqlite3_file*) {
  return static_cast<int>(sector);
}
int file_characteristics(sqlite3_file*) {
  return SQLITE_IOCAP_POWERSAFE_OVERWRITE;
}

int file_shared_map(sqlite3_file* f, int region, int size, int extend, void volatile** out) {
  auto& shared = handle(f).file->shared;
  const auto at = static_cast<std::size_t>(region);
  *out = nullptr;
  if (at >= shared.size() && extend == 0) return SQLITE_OK;
  while (at >= shared.size()) shared.push_back(std::make_unique<std::uint64_t[]>(static_cast<std::size_t>(size) / 8));
  *out = shared[at].get();
  return SQLITE_OK;
}
int file_shared_lock(sqlite3_file*, int, int, int) {
  return SQLITE_OK;
}
void file_shared_barrier(sqlite3_file*) {}
int file_shared_unmap(sqlite3_file* f, int) {
  handle(f).file->shared.clear();
  return SQLITE_OK;
}

const sqlite3_io_methods& methods() {
  static const sqlite3_io_methods all = [] {
    sqlite3_io_methods m{};
    m.iVersion = 2;
    m.xClose = file_close;
    m.xRead = file_read;
    m.xWrite = file_write;
    m.xTruncate = file_truncate;
    m.xSync = file_sync;
    m.xFileSize = file_size;
    m.xLock = file_lock;
    m.xUnlock = file_lock;
    m.xCheckReservedLock = file_reserved;
    m.xFileControl = file_control;
    m.xSectorSize = file_sector_size;
    m.xDeviceCharacteristics = file_characteristics;
    m.xShmMap = file_shared_map;
    m.xShmLock = file_shared_lock;
    m.xShmBarrier = file_shared_barrier;
    m.xShmUnmap = file_shared_unmap;
    return m;
  }();
  return all;
}

int vfs_open(sqlite3_vfs* vfs, const char* name, sqlite3_file* out, int flags, int* out_flags) {
  out->pMethods = nullptr;
  FaultDisk& d = disk(vfs);
  if (d.strikes(Op::open)) return SQLITE_CANTOPEN;
  const bool is_new = name != nullptr && !d.has(name);
  auto file = d.open(name, (flags & SQLITE_OPEN_CREATE) != 0);
  if (!file) return SQLITE_CANTOPEN;
  // SQLite's own Unix layer does so for logs and journals.
  if (is_new) file->syncs_folder = (flags & (SQLITE_OPEN_WAL | SQLITE_OPEN_MAIN_JOURNAL)) != 0;
  Handle* h = new (out) Handle{{}, &d, std::move(file), name == nullptr};
  h->base.pMethods = &methods();
  if (out_flags != nullptr) *out_flags = flags;
  return SQLITE_OK;
}

int vfs_delete(sqlite3_vfs* vfs, const char* name, int sync_folder) {
  FaultDisk& d = disk(vfs);
  if (d.strikes(Op::remove)) return SQLITE_IOERR_DELETE;
  if (!d.has(name)) return SQLITE_IOERR_DELETE_NOENT;
  d.remove(name, sync_folder != 0);
  return SQLITE_OK;
}

int vfs_access(sqlite3_vfs* vfs, const char* name, int, int* out) {
  FaultDisk& d = disk(vfs);
  if (d.strikes(Op::look)) return SQLITE_IOERR_ACCESS;
  *out = d.has(name) ? 1 : 0;
  return SQLITE_OK;
}

int vfs_full_name(sqlite3_vfs*, const char* name, int room, char* out) {
  sqlite3_snprintf(room, out, "%s", name);
  return SQLITE_OK;
}

int vfs_random(sqlite3_vfs* vfs, int length, char* out) {
  for (int i = 0; i < length; ++i) out[i] = static_cast<char>(disk(vfs).random()());
  return length;
}
int vfs_sleep(sqlite3_vfs*, int us) {
  return us;
}
int vfs_time(sqlite3_vfs* vfs, double* out) {
  sqlite3_vfs* below = disk(vfs).below();
  return below->xCurrentTime(below, out);
}
int vfs_last_error(sqlite3_vfs*, int, char*) {
  return 0;
}

}  // namespace

FaultDisk::FaultDisk(std::uint64_t seed) : below_(sqlite3_vfs_find(nullptr)), random_(seed) {
  vfs_.iVersion = 1;
  vfs_.szOsFile = sizeof(Handle);
  vfs_.mxPathname = 200;
  vfs_.zName = "fault-disk";
  vfs_.pAppData = this;
  vfs_.xOpen = vfs_open;
  vfs_.xDelete = vfs_delete;
  vfs_.xAccess = vfs_access;
  vfs_.xFullPathname = vfs_full_name;
  vfs_.xRandomness = vfs_random;
  vfs_.xSleep = vfs_sleep;
  vfs_.xCurrentTime = vfs_time;
  vfs_.xGetLastError = vfs_last_error;
  sqlite3_vfs_register(&vfs_, 1);
}

FaultDisk::~FaultDisk() {
  sqlite3_vfs_unregister(&vfs_);
  sqlite3_vfs_register(below_, 1);
}

bool FaultDisk::strikes(Op op) {
  if (dark_) return true;
  ++operations_;
  if (operations_ == cut_at_) dark_ = true;
  if (dark_) return true;
  if (fail_at_ == 0 || (failure_ == Failure::full && op != Op::write)) return false;
  ++countable_;
  const bool struck = countable_ == fail_at_ || (lasting_ && countable_ > fail_at_);
  fired_ = fired_ || struck;
  return struck;
}

int FaultDisk::failure_code(Op op) const {
  if (half_written() && op == Op::write) return SQLITE_FULL;
  switch (op) {
    case Op::read:
      return SQLITE_IOERR_READ;
    case Op::write:
      return SQLITE_IOERR_WRITE;
    case Op::sync:
      return SQLITE_IOERR_FSYNC;
    case Op::truncate:
      return SQLITE_IOERR_TRUNCATE;
    default:
      return SQLITE_IOERR;
  }
}

void FaultDisk::fail_at(std::int64_t n, Failure failure, bool lasting) {
  fail_at_ = n;
  failure_ = failure;
  lasting_ = lasting;
  countable_ = 0;
  fired_ = false;
}

std::shared_ptr<FaultDisk::File> FaultDisk::open(const char* name, bool create) {
  if (name == nullptr) return std::make_shared<File>();
  const auto found = files_.find(name);
  if (found != files_.end()) return found->second;
  if (!create) return nullptr;
  auto made = std::make_shared<File>();
  made->name = name;
  files_.emplace(name, made);
  return made;
}

void FaultDisk::remove(const std::string& name, bool durable) {
  files_.erase(name);
  if (durable) durable_.erase(name);
}

void FaultDisk::keep_names(File& file) {
  const auto found = files_.find(file.name);
  if (found != files_.end()) durable_[file.name] = found->second;
  if (file.syncs_folder) durable_ = files_;
  file.syncs_folder = false;
}

void FaultDisk::survive(File& file) {
  std::string image = file.synced;
  for (File::Change& change : file.pending) {
    if (chance()) {
      if (chance()) File::apply(image, change);
      continue;
    }
    if (change.truncates) continue;
    for (std::size_t at = 0; at < change.bytes.size(); at += sector - (change.at + at) % sector) {
      const std::size_t length = std::min(sector - (change.at + at) % sector, change.bytes.size() - at);
      if (chance()) continue;
      std::string piece = change.bytes.substr(at, length);
      if (random_() % 4 == 0) std::generate(piece.begin(), piece.end(), [&] { return static_cast<char>(random_()); });
      File::apply(image, {change.at + at, std::move(piece), false});
    }
  }
  file.pending.clear();
  file.shared.clear();
  file.now = file.synced = std::move(image);
}

void FaultDisk::power_up() {
  Folder left = durable_;
  for (const auto& [name, file] : durable_)
    if (files_.count(name) == 0 && chance()) left.erase(name);  // a removal that was not synced
  for (const auto& [name, file] : files_)  // a new name, or a new file under an old name, that was not synced
    if ((durable_.count(name) == 0 || durable_.at(name) != file) && chance()) left[name] = file;
  for (const auto& [name, file] : left) survive(*file);
  files_ = durable_ = std::move(left);
  cut_at_ = fail_at_ = 0;
  dark_ = false;
}

void FaultDisk::damage(const std::string& name, std::size_t at) {
  File& file = *files_.at(name);
  file.now.at(at) = static_cast<char>(file.now.at(at) ^ 0x20);
  if (at < file.synced.size()) file.synced.at(at) = file.now.at(at);
}

FaultDisk::Image FaultDisk::image() const {
  Image out;
  for (const auto& [name, file] : files_) out[name] = file->now;
  return out;
}

void FaultDisk::start_from(const Image& image) {
  files_.clear();
  for (const auto& [name, bytes] : image) {
    const auto file = open(name.c_str(), true);
    file->now = file->synced = bytes;
  }
  durable_ = files_;
}

}  // namespace jigwright::room
