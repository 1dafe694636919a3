// A scope's folder: which files are new and complete.
#pragma once

#include <cstdint>
#include <map>
#include <optional>
#include <string>
#include <vector>

namespace loadstair::recorder {

/// What one look at the folder found.
struct FolderLook {
  struct File {
    std::string name;
    std::string bytes;
    std::int64_t age_ns = 0;  ///< since its last change, by the host's and the file system's clock; >= 0
  };
  std::vector<File> files;          ///< complete and not taken before, by name
  std::vector<std::string> events;  ///< for a person: what cannot be read, and what to do; each once
};

/// Files that are there when the watch begins are old and never taken. A later CSV file is complete when two
/// looks one after the other find it with the same size and time; a file that changes after it was taken is
/// taken again. One thread at a time; `look` reads files and belongs off the I/O thread.
class FolderWatch {
 public:
  /// most_bytes   larger files are not read, with an event.
  explicit FolderWatch(std::string folder, std::uint64_t most_bytes = 256ULL << 20);

  [[nodiscard]] FolderLook look();

 private:
  struct Stamp {
    std::uint64_t size = 0;
    std::int64_t changed = 0;  ///< the file system's own clock
    bool operator==(const Stamp&) const = default;
  };
  struct Seen {
    Stamp stamp;
    bool settled = false;  ///< taken, old, or refused: not looked at again until it changes
  };
  void consider(const std::string& name, Stamp stamp, FolderLook& found);

  std::string folder_;
  std::uint64_t most_bytes_;
  bool began_ = false;
  bool complained_ = false;
  std::map<std::string, Seen> seen_;
};

}  // namespace loadstair::recorder
