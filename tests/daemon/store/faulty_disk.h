// A disk that fails when told to: an SQLite VFS that stands before the real one while it lives.
#pragma once

#include <sqlite3.h>

#include <cstdint>
#include <map>
#include <mutex>
#include <string>
#include <vector>

namespace loadstair::store_tests {

/// Counts what changes files (writes, syncs, truncations) over all files, and fails what it is told to.
/// One lives at a time; records opened while it lives are on it.
class FaultyDisk {
 public:
  FaultyDisk();
  FaultyDisk(const FaultyDisk&) = delete;
  FaultyDisk& operator=(const FaultyDisk&) = delete;
  ~FaultyDisk();

  /// From the n-th change counted from now on (1 is the next), `count` of them fail with `code`.
  void fail(std::int64_t nth, std::int64_t count, int code);
  /// From the n-th change on the power is gone: everything fails, and what was not synced is lost.
  void cut_power(std::int64_t nth);
  [[nodiscard]] std::int64_t changes() const;  ///< since the last fail() or cut_power()
  [[nodiscard]] bool failed() const;           ///< at least one change was failed since then

  /// After a power cut, with every record closed: puts the files back to what was synced.
  void restore();

  struct Undo {
    std::int64_t offset = 0, size_before = 0;
    std::vector<char> bytes;
  };

  // Called by the VFS.
  int before_change();  ///< SQLITE_OK or the code to fail with
  void remember(const std::string& path, Undo undo);
  void synced(const std::string& path);

 private:
  mutable std::mutex mutex_;
  std::int64_t counted_ = 0, fail_from_ = 0, fail_count_ = 0;
  int code_ = SQLITE_OK;
  bool failed_ = false;
  std::map<std::string, std::vector<Undo>> unsynced_;
};

}  // namespace loadstair::store_tests
