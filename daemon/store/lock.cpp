#include "daemon/store/lock.h"

#include <fcntl.h>
#include <sys/file.h>
#include <unistd.h>

#include <array>
#include <cerrno>
#include <system_error>

#include "analysis/base/number.h"

namespace loadstair::store {
namespace {

std::string held_by(int descriptor) {
  std::array<char, 32> text{};
  const ssize_t size = ::pread(descriptor, text.data(), text.size(), 0);
  const auto process =
      base::parse_integer(std::string_view{text.data(), size > 0 ? static_cast<std::size_t>(size) : 0});
  return process ? " (process " + base::print_integer(*process) + ")" : "";
}

}  // namespace

base::Outcome<WriteLock> WriteLock::take(const std::string& record_path) {
  const std::string path = record_path + ".lock";
  const int descriptor = ::open(path.c_str(), O_RDWR | O_CREAT | O_CLOEXEC, 0644);
  if (descriptor < 0) {
    return base::Refusal{record_path, "cannot make the lock file " + path + ": " +
                                          std::generic_category().message(errno) +
                                          ". Name a record in a folder that exists and can be written"};
  }
  WriteLock lock{descriptor};
  if (::flock(descriptor, LOCK_EX | LOCK_NB) != 0) {
    return base::Refusal{record_path, "another program writes to this record" + held_by(descriptor) +
                                          ". Let that one do it, or stop it first"};
  }
  const std::string process = base::print_integer(::getpid()) + "\n";
  if (::ftruncate(descriptor, 0) != 0 ||
      ::pwrite(descriptor, process.data(), process.size(), 0) != static_cast<ssize_t>(process.size())) {
    // The lock holds without its note.
  }
  return lock;
}

WriteLock::~WriteLock() {
  if (descriptor_ >= 0) ::close(descriptor_);
}

}  // namespace loadstair::store
