// What an open record and a reader hold. Of this room only.
#pragma once

#include <memory>
#include <optional>
#include <string>

#include "daemon/store/connection.h"
#include "daemon/store/lock.h"
#include "daemon/store/reader.h"
#include "daemon/store/record.h"

namespace loadstair::store {

struct Record::State {
  std::string path;
  Mode mode = Mode::read;
  std::optional<WriteLock> lock;              ///< write
  std::unique_ptr<Record::Connection> write;  ///< write; a writer's thread uses it while one lives
  bool writer_lives = false;
  bool failed = false;  ///< the writer ended on a failure: no checkpoint on close
};

struct Reader::State {
  std::string path;
  std::unique_ptr<Record::Connection> connection;
};

/// The refusal of a fault met while reading or opening `path`.
[[nodiscard]] base::Refusal to_refusal(const SqlFault& fault, const std::string& path);

}  // namespace loadstair::store
