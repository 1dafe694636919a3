#include "drivers/rehearsal/pty.h"

#include <fcntl.h>
#include <stdlib.h>  // NOLINT: posix_openpt is POSIX, not C
#include <sys/ioctl.h>
#include <sys/stat.h>
#include <termios.h>
#include <unistd.h>

#include <array>
#include <cerrno>
#include <optional>
#include <system_error>
#include <utility>

namespace loadstair::rehearsal {

namespace {

std::optional<speed_t> speed_of(int baud) {
  constexpr std::array<std::pair<int, speed_t>, 12> kSpeeds = {{{300, B300},
                                                                {600, B600},
                                                                {1200, B1200},
                                                                {2400, B2400},
                                                                {4800, B4800},
                                                                {9600, B9600},
                                                                {19200, B19200},
                                                                {38400, B38400},
                                                                {57600, B57600},
                                                                {115200, B115200},
                                                                {230400, B230400},
                                                                {460800, B460800}}};
  for (const auto& [rate, speed] : kSpeeds)
    if (rate == baud) return speed;
  return std::nullopt;
}

std::string system_reason() {
  return std::system_category().message(errno);
}

}  // namespace

base::Outcome<Pty> open_pty(int baud) {
  Pty pty;
  pty.master = ::posix_openpt(O_RDWR | O_NOCTTY | O_CLOEXEC);
  std::array<char, 128> name{};
  const bool named = pty.master >= 0 && ::grantpt(pty.master) == 0 && ::unlockpt(pty.master) == 0 &&
                     ::ptsname_r(pty.master, name.data(), name.size()) == 0;
  if (named) {
    pty.path = name.data();
    pty.slave = ::open(name.data(), O_RDWR | O_NOCTTY | O_CLOEXEC);
  }
  termios mode{};
  if (pty.slave < 0 || ::tcgetattr(pty.slave, &mode) != 0) {
    base::Refusal refusal{"pty", "the system gives none: " + system_reason()};
    if (pty.master >= 0) ::close(pty.master);
    if (pty.slave >= 0) ::close(pty.slave);
    return refusal;
  }
  ::cfmakeraw(&mode);
  if (const auto speed = speed_of(baud)) ::cfsetspeed(&mode, *speed);
  ::tcsetattr(pty.slave, TCSANOW, &mode);
  return pty;
}

bool rate_differs(int slave, int baud) {
  const auto speed = speed_of(baud);
  termios mode{};
  if (!speed || ::tcgetattr(slave, &mode) != 0) return false;
  return ::cfgetospeed(&mode) != *speed;
}

int unread(int slave) {
  int count = 0;
  return ::ioctl(slave, FIONREAD, &count) == 0 ? count : 0;
}

base::Outcome<void> publish(const std::string& target, const std::string& link) {
  struct stat info {};
  if (::lstat(link.c_str(), &info) == 0) {
    if (!S_ISLNK(info.st_mode))
      return base::Refusal{link, "something that is not a symlink has this name; choose another folder"};
    ::unlink(link.c_str());
  }
  if (::symlink(target.c_str(), link.c_str()) == 0) return {};
  return base::Refusal{link, "the name of a rehearsed port cannot be published here: " + system_reason()};
}

}  // namespace loadstair::rehearsal
