#include "faulty_disk.h"

#include <catch2/catch.hpp>
#include <cstddef>
#include <cstring>
#include <filesystem>
#include <fstream>
#include <set>

#include "sample_run.h"
#include "temporary_folder.h"

namespace loadstair::store_tests {
namespace {

FaultyDisk* the_disk = nullptr;
sqlite3_vfs* real_vfs = nullptr;

struct FaultyFile {
  sqlite3_file base;
  std::string* path;
  sqlite3_file* real;
};

FaultyFile* faulty(sqlite3_file* file) {
  return reinterpret_cast<FaultyFile*>(file);
}
sqlite3_file* real(sqlite3_file* file) {
  return faulty(file)->real;
}

/// What a change of [offset, offset + size) takes away.
FaultyDisk::Undo undo_of(sqlite3_file* file, std::int64_t offset, std::int64_t size) {
  FaultyDisk::Undo undo;
  sqlite3_int64 before = 0;
  real(file)->pMethods->xFileSize(real(file), &before);
  undo.offset = offset;
  undo.size_before = before;
  const std::int64_t kept = std::max<std::int64_t>(0, std::min<std::int64_t>(size, before - offset));
  undo.bytes.resize(static_cast<std::size_t>(kept));
  if (kept > 0) real(file)->pMethods->xRead(real(file), undo.bytes.data(), static_cast<int>(kept), offset);
  return undo;
}

int close_file(sqlite3_file* file) {
  const int code = real(file)->pMethods->xClose(real(file));
  delete faulty(file)->path;
  return code;
}
int read_file(sqlite3_file* f, void* into, int size, sqlite3_int64 at) {
  return real(f)->pMethods->xRead(real(f), into, size, at);
}
int write_file(sqlite3_file* f, const void* from, int size, sqlite3_int64 at) {
  if (const int code = the_disk->before_change(); code != SQLITE_OK) return code;
  the_disk->remember(*faulty(f)->path, undo_of(f, at, size));
  return real(f)->pMethods->xWrite(real(f), from, size, at);
}
int truncate_file(sqlite3_file* f, sqlite3_int64 size) {
  if (const int code = the_disk->before_change(); code != SQLITE_OK) return code;
  sqlite3_int64 before = 0;
  real(f)->pMethods->xFileSize(real(f), &before);
  if (before > size) the_disk->remember(*faulty(f)->path, undo_of(f, size, before - size));
  return real(f)->pMethods->xTruncate(real(f), size);
}
/// The model of the disk decides what is synced; the real disk need not be waited for.
int sync_file(sqlite3_file* f, int /*flags*/) {
  if (const int code = the_disk->before_change(); code != SQLITE_OK) return code;
  the_disk->synced(*faulty(f)->path);
  return SQLITE_OK;
}
int file_size(sqlite3_file* f, sqlite3_int64* size) {
  return real(f)->pMethods->xFileSize(real(f), size);
}
int lock_file(sqlite3_file* f, int level) {
  return real(f)->pMethods->xLock(real(f), level);
}
int unlock_file(sqlite3_file* f, int level) {
  return real(f)->pMethods->xUnlock(real(f), level);
}
int check_lock(sqlite3_file* f, int* out) {
  return real(f)->pMethods->xCheckReservedLock(real(f), out);
}
int control(sqlite3_file* f, int op, void* arg) {
  return real(f)->pMethods->xFileControl(real(f), op, arg);
}
int sector_size(sqlite3_file* f) {
  return real(f)->pMethods->xSectorSize(real(f));
}
/// Nothing is promised of the disk: no safe append, no atomic write, no power-safe overwrite.
int characteristics(sqlite3_file*) {
  return 0;
}
int shm_map(sqlite3_file* f, int page, int size, int extend, volatile void** out) {
  return real(f)->pMethods->xShmMap(real(f), page, size, extend, out);
}
int shm_lock(sqlite3_file* f, int offset, int n, int flags) {
  return real(f)->pMethods->xShmLock(real(f), offset, n, flags);
}
void shm_barrier(sqlite3_file* f) {
  real(f)->pMethods->xShmBarrier(real(f));
}
int shm_unmap(sqlite3_file* f, int remove) {
  return real(f)->pMethods->xShmUnmap(real(f), remove);
}

const sqlite3_io_methods kMethods = {2,           close_file,  read_file,       write_file,  truncate_file,
                                     sync_file,   file_size,   lock_file,       unlock_file, check_lock,
                                     control,     sector_size, characteristics, shm_map,     shm_lock,
                                     shm_barrier, shm_unmap,   nullptr,         nullptr};

int open_file(sqlite3_vfs*, const char* name, sqlite3_file* file, int flags, int* out_flags) {
  FaultyFile* mine = faulty(file);
  mine->real = reinterpret_cast<sqlite3_file*>(mine + 1);
  mine->base.pMethods = nullptr;
  const int code = real_vfs->xOpen(real_vfs, name, mine->real, flags, out_flags);
  if (code != SQLITE_OK) return code;
  mine->path = new std::string{name == nullptr ? "" : name};
  mine->base.pMethods = &kMethods;
  return SQLITE_OK;
}

sqlite3_vfs& faulty_vfs() {
  static sqlite3_vfs vfs = [] {
    real_vfs = sqlite3_vfs_find(nullptr);
    sqlite3_vfs copy = *real_vfs;
    copy.zName = "faulty";
    copy.szOsFile = static_cast<int>(sizeof(FaultyFile)) + real_vfs->szOsFile;
    copy.xOpen = open_file;
    copy.pNext = nullptr;
    return copy;
  }();
  return vfs;
}

}  // namespace

FaultyDisk::FaultyDisk() {
  the_disk = this;
  sqlite3_vfs_register(&faulty_vfs(), 1);
}

FaultyDisk::~FaultyDisk() {
  sqlite3_vfs_unregister(&faulty_vfs());
  sqlite3_vfs_register(real_vfs, 1);
  the_disk = nullptr;
}

void FaultyDisk::fail(std::int64_t nth, std::int64_t count, int code) {
  const std::lock_guard lock{mutex_};
  counted_ = 0;
  fail_from_ = nth;
  fail_count_ = count;
  code_ = code;
  failed_ = false;
}

void FaultyDisk::cut_power(std::int64_t nth) {
  fail(nth, INT64_MAX / 2, SQLITE_IOERR_WRITE);
}

std::int64_t FaultyDisk::changes() const {
  const std::lock_guard lock{mutex_};
  return counted_;
}

bool FaultyDisk::failed() const {
  const std::lock_guard lock{mutex_};
  return failed_;
}

int FaultyDisk::before_change() {
  const std::lock_guard lock{mutex_};
  ++counted_;
  if (fail_from_ == 0 || counted_ < fail_from_ || counted_ >= fail_from_ + fail_count_) return SQLITE_OK;
  failed_ = true;
  return code_;
}

void FaultyDisk::remember(const std::string& path, Undo undo) {
  const std::lock_guard lock{mutex_};
  unsynced_[path].push_back(std::move(undo));
}

void FaultyDisk::synced(const std::string& path) {
  const std::lock_guard lock{mutex_};
  unsynced_[path].clear();
}

void FaultyDisk::restore() {
  const std::lock_guard lock{mutex_};
  for (auto& [path, undos] : unsynced_) {
    for (auto undo = undos.rbegin(); undo != undos.rend(); ++undo) {
      std::error_code none;
      if (!std::filesystem::exists(path, none)) continue;
      {
        std::fstream file{path, std::ios::in | std::ios::out | std::ios::binary};
        file.seekp(undo->offset);
        file.write(undo->bytes.data(), static_cast<std::streamsize>(undo->bytes.size()));
      }
      std::filesystem::resize_file(path, static_cast<std::uintmax_t>(undo->size_before), none);
    }
    std::error_code none;
    std::filesystem::remove(path + "-shm", none);  // shared memory does not outlive a power cut
  }
  unsynced_.clear();
}

namespace {

using namespace loadstair::store;

constexpr int kBatches = 4;
constexpr int kReadingsPerBatch = 3;

struct Posted {
  RunId run = 0;
  std::set<double> values;        ///< posted
  std::set<double> acknowledged;  ///< on the disk, as the writer said
  bool capture_acknowledged = false;
};

/// Posts a run in small batches, each flushed up to `tries` times; stops at the first that is not
/// acknowledged.
Posted post_batches(Writer& writer, int tries) {
  Posted posted;
  posted.run = writer.begin_run(sample_start());
  const auto flushed = [&] {
    for (int i = 0; i < tries; ++i) {
      if (writer.flush().ok()) return true;
    }
    return false;
  };
  for (int batch = 0; batch < kBatches; ++batch) {
    for (int i = 0; i < kReadingsPerBatch; ++i) {
      const double value = 100.0 * batch + i;
      writer.post(sample_reply(posted.run, kSecond + batch, value));
      posted.values.insert(value);
    }
    if (!flushed()) return posted;
    posted.acknowledged = posted.values;
  }
  writer.post(CaptureItem{posted.run, 0, "c.csv", "scope", kSecond,
                          std::make_shared<const std::string>(std::string(1'500'000, 'c'))});
  posted.capture_acknowledged = flushed();
  return posted;
}

void check_integrity(const std::string& path) {
  sqlite3* db = nullptr;
  sqlite3_stmt* statement = nullptr;
  REQUIRE(sqlite3_open(path.c_str(), &db) == SQLITE_OK);
  REQUIRE(sqlite3_prepare_v2(db, "PRAGMA integrity_check", -1, &statement, nullptr) == SQLITE_OK);
  REQUIRE(sqlite3_step(statement) == SQLITE_ROW);
  CHECK(std::string{reinterpret_cast<const char*>(sqlite3_column_text(statement, 0))} == "ok");
  sqlite3_finalize(statement);
  sqlite3_close(db);
}

/// Every acknowledged reading is there once; nothing that was never posted is.
void check_kept(const std::string& path, const Posted& posted) {
  check_integrity(path);
  auto record = Record::open(path, Mode::write);
  if (!record) FAIL(record.refusal().text());
  auto reader = record->reader();
  REQUIRE(reader.ok());
  auto run = reader->load_run(posted.run);
  if (posted.acknowledged.empty() && !run.ok()) return;
  if (!run) FAIL(run.refusal().text());
  const std::vector<double>& values = run->channels[0].value;
  const std::set<double> found{values.begin(), values.end()};
  CHECK(found.size() == values.size());
  for (const double value : posted.acknowledged) CHECK(found.count(value) == 1);
  for (const double value : found) CHECK(posted.values.count(value) == 1);
  if (posted.capture_acknowledged) {
    REQUIRE(run->captures.size() == 1);
    CHECK(run->captures[0].bytes == std::string(1'500'000, 'c'));
  }
}

}  // namespace

TEST_CASE("one failed write, whichever it is, loses nothing: the batch is tried again") {
  const int code = GENERATE(SQLITE_FULL, SQLITE_IOERR_WRITE, SQLITE_IOERR_FSYNC);
  bool went_through = false;
  for (std::int64_t nth = 1; !went_through && nth < 500; ++nth) {
    INFO("failing change " << nth << " with code " << code);
    const TemporaryFolder folder;
    FaultyDisk disk;
    Posted posted;
    {
      auto record = Record::open(folder.file("record.db"), Mode::write);
      REQUIRE(record.ok());
      disk.fail(nth, 1, code);
      int failures = 0;
      int recoveries = 0;
      auto writer = Writer::start(*record, {.threaded = false,
                                            .on_failure = [&](const Failure&) { ++failures; },
                                            .on_recovery = [&] { ++recoveries; }});
      REQUIRE(writer.ok());
      posted = post_batches(**writer, 2);
      CHECK(posted.acknowledged.size() == kBatches * kReadingsPerBatch);
      CHECK(posted.capture_acknowledged);
      CHECK(failures == recoveries);
      CHECK(failures == (disk.failed() ? 1 : 0));
      went_through = !disk.failed();
      static_cast<void>((*writer)->close());
    }
    check_kept(folder.file("record.db"), posted);
  }
  CHECK(went_through);
}

TEST_CASE("a power cut at any write keeps what was acknowledged (R10)") {
  bool went_through = false;
  for (std::int64_t nth = 1; !went_through && nth < 500; ++nth) {
    INFO("power cut at change " << nth);
    const TemporaryFolder folder;
    FaultyDisk disk;
    Posted posted;
    {
      auto record = Record::open(folder.file("record.db"), Mode::write);
      REQUIRE(record.ok());
      disk.cut_power(nth);
      auto writer = Writer::start(*record, {.threaded = false});
      REQUIRE(writer.ok());
      posted = post_batches(**writer, 1);
      went_through = !disk.failed();
      static_cast<void>((*writer)->close());
    }
    disk.fail(0, 0, SQLITE_OK);
    disk.restore();
    check_kept(folder.file("record.db"), posted);
  }
  CHECK(went_through);
}

TEST_CASE("a full disk is told once, and what waited is written when there is room again") {
  const TemporaryFolder folder;
  FaultyDisk disk;
  auto record = Record::open(folder.file("record.db"), Mode::write);
  REQUIRE(record.ok());
  std::mutex mutex;
  std::vector<Failure> failures;
  int recoveries = 0;
  WriterOptions options;
  options.retry_after = std::chrono::milliseconds{1};
  options.on_failure = [&](const Failure& failure) {
    const std::lock_guard lock{mutex};
    failures.push_back(failure);
  };
  options.on_recovery = [&] {
    const std::lock_guard lock{mutex};
    ++recoveries;
  };
  auto writer = Writer::start(*record, options);
  REQUIRE(writer.ok());
  const RunId run = (*writer)->begin_run(sample_start());
  REQUIRE((*writer)->flush(std::chrono::seconds{20}).ok());

  disk.fail(1, INT64_MAX / 2, SQLITE_FULL);
  for (int i = 0; i < 10; ++i) (*writer)->post(sample_reply(run, kSecond + i, i));
  const auto flushed = (*writer)->flush(std::chrono::seconds{20});
  REQUIRE_FALSE(flushed.ok());
  CHECK(flushed.refusal().reason.find("Make room") != std::string::npos);
  const Health ill = (*writer)->health();
  REQUIRE(ill.failure.has_value());
  CHECK(ill.failure->kind == Failure::Kind::disk_full);
  CHECK(ill.committed == 1);
  CHECK_FALSE((*writer)->flush(std::chrono::seconds{20}).ok());

  disk.fail(0, 0, SQLITE_OK);
  // A flush that meets the last failing attempt says so; the next one goes through.
  if (!(*writer)->flush(std::chrono::seconds{20}).ok())
    REQUIRE((*writer)->flush(std::chrono::seconds{20}).ok());
  CHECK((*writer)->health().committed == 11);
  CHECK_FALSE((*writer)->health().failure.has_value());
  REQUIRE((*writer)->close().ok());
  CHECK(failures.size() == 1);
  CHECK(recoveries == 1);
  auto reader = record->reader();
  CHECK(reader->load_run(run)->channels[0].value.size() == 10);
}

TEST_CASE("a close that cannot write says how much is missing, and why") {
  const TemporaryFolder folder;
  FaultyDisk disk;
  const bool threaded = GENERATE(false, true);
  auto record = Record::open(folder.file("record.db"), Mode::write);
  REQUIRE(record.ok());
  auto writer = Writer::start(*record, {.threaded = threaded});
  REQUIRE(writer.ok());
  disk.fail(1, INT64_MAX / 2, SQLITE_IOERR_WRITE);
  const RunId run = (*writer)->begin_run(sample_start());
  (*writer)->post(sample_reply(run, kSecond, 1.0));
  const auto closed = (*writer)->close(std::chrono::milliseconds{50});
  REQUIRE_FALSE(closed.ok());
  CHECK(closed.refusal().reason.find("2 items are not on the disk") == 0);
}

}  // namespace loadstair::store_tests
