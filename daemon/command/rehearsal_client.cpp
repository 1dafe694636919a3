#include "daemon/command/rehearsal_client.h"

#include <poll.h>
#include <sys/socket.h>
#include <sys/un.h>
#include <unistd.h>

#include <array>
#include <chrono>
#include <cstring>

namespace loadstair::command {
namespace {

/// A descriptor that closes itself.
struct Socket {
  int fd = -1;
  Socket() = default;
  ~Socket() {
    if (fd >= 0) close(fd);
  }
  Socket(const Socket&) = delete;
  Socket& operator=(const Socket&) = delete;
};

}  // namespace

base::Outcome<std::string> ask_rehearsal(const std::string& socket_path, const std::string& line,
                                         double limit_s) {
  sockaddr_un where{};
  where.sun_family = AF_UNIX;
  if (socket_path.size() >= sizeof(where.sun_path)) {
    return base::Refusal{socket_path, "the path is too long for a socket; choose a shorter folder"};
  }
  std::memcpy(where.sun_path, socket_path.c_str(), socket_path.size() + 1);
  Socket socket_to;
  socket_to.fd = socket(AF_UNIX, SOCK_STREAM | SOCK_CLOEXEC, 0);
  if (connect(socket_to.fd, reinterpret_cast<const sockaddr*>(&where), sizeof(where)) != 0) {
    return base::Refusal{socket_path, "no rehearsed bench listens there"};
  }
  const std::string text = line + "\n";
  if (send(socket_to.fd, text.data(), text.size(), MSG_NOSIGNAL) != static_cast<ssize_t>(text.size())) {
    return base::Refusal{socket_path, "the rehearsed bench did not take \"" + line + "\""};
  }
  const auto until = std::chrono::steady_clock::now() + std::chrono::duration<double>{limit_s};
  std::string answer;
  std::array<char, 4096> buffer{};
  while (answer.find('\n') == std::string::npos) {
    const auto left =
        std::chrono::duration_cast<std::chrono::milliseconds>(until - std::chrono::steady_clock::now())
            .count();
    pollfd waiting{socket_to.fd, POLLIN, 0};
    if (left <= 0 || poll(&waiting, 1, static_cast<int>(left)) <= 0) {
      return base::Refusal{socket_path, "the rehearsed bench did not answer \"" + line + "\" in time"};
    }
    const ssize_t count = recv(socket_to.fd, buffer.data(), buffer.size(), 0);
    if (count <= 0)
      return base::Refusal{socket_path, "the rehearsed bench closed without answering \"" + line + "\""};
    answer.append(buffer.data(), static_cast<std::size_t>(count));
  }
  answer.resize(answer.find('\n'));
  if (answer.starts_with("error"))
    return base::Refusal{"rehearsal", answer.substr(std::min<std::size_t>(6, answer.size()))};
  return answer;
}

}  // namespace loadstair::command
