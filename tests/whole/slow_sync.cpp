// Preloaded into the daemon by crash_check.py: when the file "stall" is in $LOADSTAIR_STALL, the next sync of
// a file says so (file "stalled") and waits inside the call, so that a kill -9 finds the program in the
// middle of a commit.
#include <dlfcn.h>
#include <fcntl.h>
#include <unistd.h>

#include <cstdlib>
#include <string>

namespace {

void stall_if_asked() {
  const char* folder = std::getenv("LOADSTAIR_STALL");
  if (folder == nullptr || access((std::string{folder} + "/stall").c_str(), F_OK) != 0) return;
  const int said = open((std::string{folder} + "/stalled").c_str(), O_WRONLY | O_CREAT | O_CLOEXEC, 0600);
  if (said >= 0) close(said);
  sleep(30);
}

int real(const char* name, int fd) {
  using Sync = int (*)(int);
  return reinterpret_cast<Sync>(dlsym(RTLD_NEXT, name))(fd);
}

}  // namespace

extern "C" int fsync(int fd) {
  stall_if_asked();
  return real("fsync", fd);
}

extern "C" int fdatasync(int fd) {
  stall_if_asked();
  return real("fdatasync", fd);
}
