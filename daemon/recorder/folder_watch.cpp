#include "daemon/recorder/folder_watch.h"

#include <algorithm>
#include <cctype>
#include <chrono>
#include <filesystem>
#include <fstream>
#include <iterator>
#include <system_error>

#include "analysis/base/number.h"

namespace loadstair::recorder {
namespace {

namespace fs = std::filesystem;

bool is_csv(const fs::path& path) {
  auto extension = path.extension().string();
  std::transform(extension.begin(), extension.end(), extension.begin(),
                 [](unsigned char c) { return static_cast<char>(std::tolower(c)); });
  return extension == ".csv" && !path.filename().string().starts_with('.');
}

std::optional<std::string> read_whole(const fs::path& path) {
  std::ifstream file{path, std::ios::binary};
  if (!file) return std::nullopt;
  std::string bytes{std::istreambuf_iterator<char>{file}, std::istreambuf_iterator<char>{}};
  if (file.bad()) return std::nullopt;
  return bytes;
}

}  // namespace

FolderWatch::FolderWatch(std::string folder, std::uint64_t most_bytes)
    : folder_{std::move(folder)}, most_bytes_{most_bytes} {}

FolderLook FolderWatch::look() {
  FolderLook found;
  std::error_code error;
  fs::directory_iterator entries{folder_, error};
  if (error) {
    if (!complained_) {
      found.events.push_back("cannot look into the folder " + folder_ + ": " + error.message() +
                             "; create it, or correct the folder in the hook-up file");
    }
    complained_ = true;
    began_ = true;  // what appears in it from now on is new
    return found;
  }
  complained_ = false;
  std::map<std::string, Stamp> present;
  for (const fs::directory_iterator end; entries != end; entries.increment(error)) {
    if (error) break;
    std::error_code failure;
    if (!is_csv(entries->path()) || !entries->is_regular_file(failure) || failure) continue;
    const auto size = entries->file_size(failure);
    if (failure) continue;  // it went away between the two
    const auto changed = entries->last_write_time(failure);
    if (failure) continue;
    present[entries->path().filename().string()] = {size, changed.time_since_epoch().count()};
  }
  for (const auto& [name, stamp] : present) consider(name, stamp, found);
  began_ = true;
  return found;
}

void FolderWatch::consider(const std::string& name, Stamp stamp, FolderLook& found) {
  const auto [place, is_new] = seen_.try_emplace(name, Seen{stamp, !began_});
  auto& seen = place->second;
  if (is_new) return;
  if (seen.stamp != stamp) {
    seen = {stamp, false};
    return;
  }
  if (seen.settled || stamp.size == 0) return;
  seen.settled = true;
  const auto path = fs::path{folder_} / name;
  if (stamp.size > most_bytes_) {
    found.events.push_back("the capture " + path.string() + " has " +
                           base::print_integer(static_cast<std::int64_t>(stamp.size)) + " bytes, more than " +
                           base::print_integer(static_cast<std::int64_t>(most_bytes_)) +
                           "; export fewer samples");
    return;
  }
  auto bytes = read_whole(path);
  if (!bytes) {
    found.events.push_back("cannot read the capture " + path.string() + "; check its permissions");
    return;
  }
  const auto changed = fs::file_time_type{fs::file_time_type::duration{stamp.changed}};
  const auto age =
      std::chrono::duration_cast<std::chrono::nanoseconds>(fs::file_time_type::clock::now() - changed);
  found.files.push_back({name, std::move(*bytes), std::max<std::int64_t>(age.count(), 0)});
}

}  // namespace loadstair::recorder
