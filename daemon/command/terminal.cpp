#include "daemon/command/terminal.h"

#include <poll.h>
#include <sys/ioctl.h>
#include <termios.h>
#include <unistd.h>

#include <array>
#include <csignal>
#include <cstdlib>
#include <iostream>
#include <string_view>

namespace loadstair::command {
namespace {

volatile std::sig_atomic_t g_interrupted = 0;

std::size_t width_of_terminal() {
  winsize size{};
  if (ioctl(STDOUT_FILENO, TIOCGWINSZ, &size) == 0 && size.ws_col > 20) return size.ws_col;
  return 80;
}

bool lines_can_be_written_over() {
  const char* kind = std::getenv("TERM");
  return output_is_terminal() && (kind == nullptr || std::string_view{kind} != "dumb");
}

/// The first `width` characters of UTF-8 text.
std::string clipped(const std::string& text, std::size_t width) {
  std::size_t characters = 0;
  for (std::size_t i = 0; i < text.size(); ++i) {
    const bool begins = (static_cast<unsigned char>(text[i]) & 0xC0U) != 0x80U;
    if (begins && ++characters > width) return text.substr(0, i);
  }
  return text;
}

}  // namespace

bool output_is_terminal() {
  return isatty(STDOUT_FILENO) == 1;
}
bool input_is_terminal() {
  return isatty(STDIN_FILENO) == 1;
}

std::string bold(const std::string& text) {
  if (!output_is_terminal() || std::getenv("NO_COLOR") != nullptr) return text;
  return "\033[1m" + text + "\033[0m";
}

void Progress::show(const std::string& fixed, const std::string& moving) {
  if (lines_can_be_written_over()) {
    std::cout << "\r\033[K" << clipped(fixed + (moving.empty() ? "" : ", " + moving), width_of_terminal() - 1)
              << std::flush;
    open_ = true;
    return;
  }
  if (fixed == shown_) return;
  shown_ = fixed;
  std::cout << fixed << std::endl;
}

void Progress::finish_line() {
  if (open_) std::cout << "\r\033[K" << std::flush;
  open_ = false;
}

void LineInput::discard() {
  if (!input_is_terminal()) return;
  tcflush(STDIN_FILENO, TCIFLUSH);
  pending_.clear();
}

std::optional<std::string> LineInput::next(int limit_ms) {
  const auto take = [this]() -> std::optional<std::string> {
    const auto end = pending_.find('\n');
    if (end == std::string::npos) return std::nullopt;
    std::string line = pending_.substr(0, end);
    pending_.erase(0, end + 1);
    return line;
  };
  if (auto line = take()) return line;
  pollfd waiting{STDIN_FILENO, POLLIN, 0};
  if (ended_) {
    poll(nullptr, 0, limit_ms);
    return std::nullopt;
  }
  if (poll(&waiting, 1, limit_ms) <= 0) return std::nullopt;
  std::array<char, 1024> buffer{};
  const ssize_t count = read(STDIN_FILENO, buffer.data(), buffer.size());
  if (count <= 0) {
    ended_ = true;
    return std::nullopt;
  }
  pending_.append(buffer.data(), static_cast<std::size_t>(count));
  return take();
}

void catch_interrupts() {
  const auto note = [](int) { g_interrupted = 1; };
  std::signal(SIGINT, note);
  std::signal(SIGTERM, note);
  std::signal(SIGHUP, note);
}

bool interrupted() {
  return g_interrupted != 0;
}

}  // namespace loadstair::command
