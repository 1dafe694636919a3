#include <boost/asio/io_context.hpp>
#include <catch2/catch.hpp>
#include <filesystem>
#include <fstream>
#include <set>
#include <sstream>
#include <string>
#include <vector>

#include "analysis/base/number.h"
#include "drivers/instrument/instrument.h"
#include "drivers/link/notice.h"
#include "drivers/link/task_scope.h"
#include "tests/drivers/instrument/conversation_player.h"
#include "tests/drivers/instrument/test_profiles.h"

namespace loadstair::instrument {
namespace {

namespace net = boost::asio;

constexpr std::int64_t kPatienceNs = 100'000'000'000;

std::string flag_words(std::uint32_t flags) {
  const std::vector<std::pair<Flag, const char*>> words{
      {kOverload, "overload"},        {kInvalid, "invalid"}, {kStale, "stale"},
      {kUnitChanged, "unit_changed"}, {kMissing, "missing"}, {kRangeChanged, "range_changed"}};
  std::string text;
  for (const auto& [flag, word] : words) {
    if ((flags & flag) != 0) text += std::string{text.empty() ? "" : "+"} + word;
  }
  return text;
}

std::string name_of(CommandState state) {
  switch (state) {
    case CommandState::confirmed:
      return "confirmed";
    case CommandState::sent:
      return "sent";
    case CommandState::refused:
      return "refused";
    case CommandState::unreachable:
      return "unreachable";
  }
  return "?";
}

std::string unescape(const std::string& text) {
  std::string bytes;
  for (std::size_t at = 0; at < text.size(); ++at) {
    if (text[at] != '\\' || at + 1 == text.size()) {
      bytes += text[at];
      continue;
    }
    const char kind = text[++at];
    if (kind == 'x' && at + 2 < text.size()) {
      bytes += static_cast<char>(std::stoi(text.substr(at + 1, 2), nullptr, 16));
      at += 2;
    } else {
      bytes += kind == 'n' ? '\n' : kind == 'r' ? '\r' : kind;
    }
  }
  return bytes;
}

/// Writes down what comes out of the instrument.
class Protocol final : public Sink {
 public:
  explicit Protocol(const Profile& profile) : profile_{profile} {}

  void on_exchange(const Exchange& exchange) override {
    for (const auto& reading : exchange.readings) {
      const auto& name = profile_.values[static_cast<std::size_t>(reading.value_index)].name;
      const auto flags = flag_words(reading.flags);
      const bool number = !std::isnan(reading.value);
      std::string line = "= " + name;
      if (number) line += " " + base::print_number(reading.value);
      if (!flags.empty()) line += " " + flags;
      lines.push_back(line);
      const bool none = (reading.flags & (kOverload | kInvalid | kMissing)) != 0;
      if (none == number) lines.push_back("a number where there is none, or none where there is one");
    }
  }
  void on_event(const Event& event) override {
    lines.push_back("! " + std::string{instrument::name_of(event.kind)} + " " + event.text);
  }

  std::vector<std::string> lines;

 private:
  const Profile& profile_;
};

struct Script {
  std::string profile;
  std::string identity = "north bench";
  std::vector<std::string> actions;
  std::vector<std::string> expected;
};

Script read_script(const std::string& path) {
  Script script;
  std::ifstream in{path};
  for (std::string line; std::getline(in, line);) {
    if (line.empty() || line.front() == '#') continue;
    if (line.starts_with("profile ")) {
      script.profile = line.substr(8);
    } else if (line.starts_with("identity ")) {
      script.identity = line.substr(9);
    } else if (line.front() == '=' || line.front() == '!' || line.front() == '?') {
      script.expected.push_back(line);
    } else if (line == "greet") {
      script.actions.insert(script.actions.end(), {"> *IDN?", "< north bench,test instrument,N-001,1.0"});
    } else {
      script.actions.push_back(line);
    }
  }
  return script;
}

class Player {
 public:
  explicit Player(Script script) : script_{std::move(script)}, profile_{test_profile(script_.profile)} {}

  std::string play() {
    InstrumentSettings settings;
    settings.name = "instrument";
    settings.identity = script_.identity;
    settings.poll_s = 1.0;
    settings.update_s = 0.1;
    Instrument instrument{io_.get_executor(), *clock_,  [this] { return open(); },
                          profile_,           settings, protocol_};
    tasks_.spawn(instrument.run());
    tasks_.spawn(follow(instrument));
    clock_->run(1000'000'000'000);
    if (tasks_.size() != 0) complain("something still waits");
    compare();
    return trouble_;
  }

 private:
  net::awaitable<base::Outcome<std::unique_ptr<link::Link>>> open() {
    if (absent_ > 0) {
      --absent_;
      co_return base::Refusal{"bench link", "no such port"};
    }
    auto [near, far] = link::make_memory_pair(io_.get_executor(), *clock_, "bench link");
    opened_ = std::move(far);
    opening_.notify();
    co_return std::move(near);
  }

  void complain(const std::string& what) {
    if (trouble_.empty()) trouble_ = what;
  }

  net::awaitable<void> accept() {
    while (!opened_) co_await opening_.wait_until(INT64_MAX);
    far_ = std::move(opened_);
  }

  net::awaitable<void> follow(Instrument& instrument) {
    co_await accept();
    for (const auto& action : script_.actions) {
      co_await act(instrument, action);
      // What follows at the same instant comes first.
      co_await clock_->sleep_for(std::chrono::nanoseconds{1});
      if (!trouble_.empty()) break;
    }
    co_await clock_->sleep_for(std::chrono::milliseconds{1});  // the last reply is read
    instrument.stop();
    co_await clock_->sleep_for(std::chrono::seconds{1});
    if (instrument.state() != State::stopped) complain("not stopped within a second");
    far_.reset();
    opened_.reset();
  }

  net::awaitable<void> act(Instrument& instrument, const std::string& action) {
    if (action.starts_with("> ")) {
      const auto query = co_await far_->read_line("\n", clock_->now_ns() + kPatienceNs);
      if (query.bytes != action.substr(2)) complain("'" + query.bytes + "' came instead of '" + action + "'");
    } else if (action.starts_with("<< ")) {
      co_await far_->write(unescape(action.substr(3)), clock_->now_ns());
    } else if (action.starts_with("< ")) {
      co_await far_->write(unescape(action.substr(2)) + "\n", clock_->now_ns());
    } else if (action.starts_with("~ ")) {
      const double length_s = base::parse_number(action.substr(2)).value();
      co_await clock_->sleep_for(std::chrono::nanoseconds{static_cast<std::int64_t>(length_s * 1e9)});
    } else if (action == "close") {
      far_->close();
    } else if (action == "accept") {
      co_await accept();
    } else if (action.starts_with("absent ")) {
      absent_ = static_cast<int>(base::parse_integer(action.substr(7)).value());
    } else if (action.starts_with("do ")) {
      tasks_.spawn(command(instrument, action.substr(3)));
    } else {
      complain("the script does not know '" + action + "'");
    }
  }

  net::awaitable<void> command(Instrument& instrument, std::string text) {
    std::istringstream words{text};
    std::string name;
    std::string setting;
    std::string value;
    words >> name >> setting >> value;
    CommandOutcome outcome;
    if (name == "make_safe") {
      outcome = co_await instrument.make_safe();
    } else if (name == "switch_on") {
      outcome = co_await instrument.switch_on();
    } else if (name == "apply") {
      outcome = co_await instrument.apply(setting, base::parse_number(value).value());
    } else {
      complain("no such command: " + text);
    }
    protocol_.lines.push_back("? " + name + " " + name_of(outcome.state) + " " + outcome.text);
  }

  void compare() {
    const auto& seen = protocol_.lines;
    for (std::size_t i = 0; i < std::max(seen.size(), script_.expected.size()); ++i) {
      const auto got = i < seen.size() ? seen[i] : "nothing";
      const auto wanted = i < script_.expected.size() ? script_.expected[i] : "nothing";
      const bool reading = wanted.starts_with("= ");
      if (reading ? got == wanted : got.starts_with(wanted)) continue;
      std::string all;
      for (const auto& line : seen) all += "\n  " + line;
      complain("'" + got + "' instead of '" + wanted + "'");
      trouble_ += "; all that came:" + all;
      return;
    }
  }

  Script script_;
  Profile profile_;
  net::io_context io_;
  std::unique_ptr<link::VirtualClock> clock_ = link::VirtualClock::make(io_, 0);
  Protocol protocol_{profile_};
  link::Notice opening_{*clock_, io_.get_executor()};
  std::unique_ptr<link::Link> opened_;
  std::unique_ptr<link::Link> far_;
  int absent_ = 0;
  std::string trouble_;
  link::TaskScope tasks_{io_.get_executor(),
                         [](std::exception_ptr failure) { std::rethrow_exception(failure); }};
};

}  // namespace

std::string play_conversation(const std::string& path) {
  return Player{read_script(path)}.play();
}

}  // namespace loadstair::instrument

TEST_CASE("instrument conversations go as written") {
  std::set<std::filesystem::path> files;
  for (const auto& file :
       std::filesystem::directory_iterator{LOADSTAIR_SOURCE "/tests/drivers/instrument/conversations"}) {
    files.insert(file.path());
  }
  CHECK(files.size() >= 20);
  for (const auto& file : files) {
    INFO(file.filename().string());
    CHECK(loadstair::instrument::play_conversation(file.string()) == "");
  }
}
