// One writer per record, across processes. Of this room only.
#pragma once

#include <string>

#include "analysis/base/outcome.h"

namespace loadstair::store {

/// An flock on a file beside the record: never on the record itself, since closing any descriptor of it would
/// drop SQLite's own locks. The file stays; the lock goes with the process, however it ends.
class WriteLock {
 public:
  [[nodiscard]] static base::Outcome<WriteLock> take(const std::string& record_path);
  WriteLock(WriteLock&& other) noexcept : descriptor_{other.descriptor_} { other.descriptor_ = -1; }
  WriteLock& operator=(WriteLock&&) = delete;
  ~WriteLock();

 private:
  explicit WriteLock(int descriptor) : descriptor_{descriptor} {}
  int descriptor_ = -1;
};

}  // namespace loadstair::store
