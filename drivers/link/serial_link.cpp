#include <fcntl.h>
#include <libserialport.h>
#include <sys/file.h>
#include <sys/stat.h>
#include <sys/sysmacros.h>
#include <termios.h>
#include <unistd.h>

#include <array>
#include <boost/asio/this_coro.hpp>
#include <cerrno>
#include <system_error>
#include <utility>

#include "analysis/base/number.h"
#include "drivers/link/descriptor_link.h"

namespace loadstair::link {
namespace {

using base::Outcome;
using base::Refusal;

/// An open terminal and how to close it.
struct OpenTerminal {
  int fd = -1;
  std::function<void(int)> close;
};

std::string reason_of(int error) {
  switch (error) {
    case ENOENT:
    case ENODEV:
    case ENXIO:
      return "no such port; is the cable plugged in? See which ports the system has, then correct the link";
    case EACCES:
    case EPERM:
      return "this user may not open it; add the user to the group that owns it (dialout), then log in again";
    case EBUSY:
    case EWOULDBLOCK:
      return "in use by another program; end that one first";
    default:
      return std::system_category().message(error);
  }
}

/// The lock holds for as long as the descriptor is open; another process, or we ourselves, get EWOULDBLOCK.
Outcome<void> lock(int fd, const std::string& name) {
  if (flock(fd, LOCK_EX | LOCK_NB) == 0) return {};
  return Refusal{name, reason_of(errno)};
}

/// Linux numbers the slave sides of ptys as majors 136 to 143.
bool is_pty(const struct stat& info) {
  const auto number = major(info.st_rdev);
  return S_ISCHR(info.st_mode) && number >= 136 && number <= 143;
}

std::optional<speed_t> standard_speed(int baud) {
  constexpr std::array<std::pair<int, speed_t>, 14> kSpeeds = {{{300, B300},
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
                                                                {460800, B460800},
                                                                {921600, B921600},
                                                                {1000000, B1000000}}};
  for (const auto& [rate, speed] : kSpeeds) {
    if (rate == baud) return speed;
  }
  return std::nullopt;
}

/// A pty has neither bits nor a rate; the rate is set all the same, since a rehearsed instrument looks at it.
Outcome<OpenTerminal> open_pty(const SerialSettings& settings, const std::string& name) {
  const int fd = ::open(settings.path.c_str(), O_RDWR | O_NOCTTY | O_NONBLOCK | O_CLOEXEC);
  if (fd < 0) return Refusal{name, reason_of(errno)};
  OpenTerminal terminal{fd, [](int own) { ::close(own); }};
  if (auto locked = lock(fd, name); !locked) {
    terminal.close(fd);
    return locked.refusal();
  }
  termios mode{};
  if (tcgetattr(fd, &mode) != 0) {
    terminal.close(fd);
    return Refusal{name, "it is not a terminal"};
  }
  cfmakeraw(&mode);
  mode.c_cflag |= CREAD | CLOCAL;
  mode.c_cc[VMIN] = 1;
  mode.c_cc[VTIME] = 0;
  if (const auto speed = standard_speed(settings.baud)) cfsetspeed(&mode, *speed);
  tcsetattr(fd, TCSANOW, &mode);
  tcflush(fd, TCIOFLUSH);
  return terminal;
}

struct PortCloser {
  void operator()(sp_port* port) const {
    sp_close(port);
    sp_free_port(port);
  }
};

/// libserialport's last message is allocated by it.
std::string last_message() {
  char* message = sp_last_error_message();
  std::string text = message != nullptr ? message : "unknown error";
  sp_free_error_message(message);
  return text;
}

sp_parity parity_of(Parity parity) {
  switch (parity) {
    case Parity::even:
      return SP_PARITY_EVEN;
    case Parity::odd:
      return SP_PARITY_ODD;
    case Parity::none:
      break;
  }
  return SP_PARITY_NONE;
}

Outcome<void> set_port(sp_port* port, const SerialSettings& settings, const std::string& name) {
  const auto refused = [&name](const std::string& what) {
    return Refusal{name, what + " is not supported by this port (" + last_message() + ")"};
  };
  if (sp_set_baudrate(port, settings.baud) != SP_OK) {
    return refused(base::print_integer(settings.baud) + " baud");
  }
  if (sp_set_bits(port, settings.data_bits) != SP_OK) {
    return refused(base::print_integer(settings.data_bits) + " data bits");
  }
  if (sp_set_parity(port, parity_of(settings.parity)) != SP_OK) return refused("this parity");
  if (sp_set_stopbits(port, settings.stop_bits) != SP_OK) {
    return refused(base::print_integer(settings.stop_bits) + " stop bits");
  }
  if (sp_set_flowcontrol(port, SP_FLOWCONTROL_NONE) != SP_OK) return refused("going without flow control");
  return {};
}

Outcome<OpenTerminal> open_port(const SerialSettings& settings, const std::string& name) {
  sp_port* raw = nullptr;
  if (sp_get_port_by_name(settings.path.c_str(), &raw) != SP_OK) {
    return Refusal{name,
                   "not one of the system's serial ports; name the device of the port, such as /dev/ttyUSB0"};
  }
  if (sp_open(raw, SP_MODE_READ_WRITE) != SP_OK) {
    const int error = sp_last_error_code();
    sp_free_port(raw);
    return Refusal{name, reason_of(error)};
  }
  std::shared_ptr<sp_port> port{raw, PortCloser{}};
  int fd = -1;
  if (sp_get_port_handle(raw, &fd) != SP_OK) return Refusal{name, last_message()};
  if (auto locked = lock(fd, name); !locked) return locked.refusal();
  if (auto set = set_port(raw, settings, name); !set) return set.refusal();
  sp_flush(raw, SP_BUF_BOTH);
  return OpenTerminal{fd, [port](int) mutable { port.reset(); }};
}

Outcome<OpenTerminal> open_terminal(const SerialSettings& settings, const std::string& name) {
  struct stat info {};
  if (stat(settings.path.c_str(), &info) != 0) return Refusal{name, reason_of(errno)};
  return is_pty(info) ? open_pty(settings, name) : open_port(settings, name);
}

}  // namespace

boost::asio::awaitable<Outcome<std::unique_ptr<Link>>> open_serial(Clock& clock, SerialSettings settings) {
  const auto name = "serial " + settings.path + " at " + base::print_integer(settings.baud) + " baud";
  const auto executor = co_await boost::asio::this_coro::executor;
  auto terminal = open_terminal(settings, name);
  if (!terminal) co_return terminal.refusal();
  co_return make_descriptor_link(executor, clock, terminal->fd, DescriptorKind::terminal, name,
                                 std::move(terminal->close));
}

}  // namespace loadstair::link
