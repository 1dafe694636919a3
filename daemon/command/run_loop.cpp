#include "daemon/command/run_loop.h"

#include <poll.h>

#include <cctype>
#include <cmath>
#include <iostream>
#include <memory>
#include <set>
#include <stdexcept>

#include "analysis/base/number.h"
#include "daemon/command/terminal.h"

namespace loadstair::command {
namespace {

using nlohmann::json;

constexpr int kLookMs = 200;
constexpr int kPatience = 25;  // looks without an answer, 5 s and the calls' own limits

std::string range_words(const json& prompt) {
  std::string words;
  for (const auto& range : prompt["ranges"]) {
    words += (words.empty() ? "" : ", ") + base::print_number(range.get<double>());
  }
  return words;
}

class TerminalPerson : public Person {
 public:
  void attend(const DaemonClient& daemon, const json& run) override {
    const json& prompt = run["prompt"];
    const auto id = prompt["id"].get<std::int64_t>();
    const std::string kind = prompt["kind"];
    if (id != shown_ || kind != shown_kind_) {
      input_.discard();
      show(prompt);
    }
    shown_ = id;
    shown_kind_ = kind;
    if (input_.ended()) {
      throw std::runtime_error{"the run asks for a person, and nobody is at this terminal: " +
                               prompt["text"].get<std::string>()};
    }
    const auto line = input_.next(kLookMs);
    if (!line) return;
    tell(kind == "hand" ? answer_hand(daemon, id, *line) : answer_typed(daemon, run, *line));
  }

  void decide_hold(const DaemonClient& daemon, const json& run) override {
    if (!hold_shown_) {
      std::cout << "\n"
                << bold("The run is held, and the power stays on: " + run["reason"].get<std::string>())
                << "\nType resume (the step begins again with its soak), skip and a reason (the next step), "
                   "or stop.\n> "
                << std::flush;
    }
    hold_shown_ = true;
    if (input_.ended()) throw std::runtime_error{"the run is held, and nobody is at this terminal"};
    const auto line = input_.next(kLookMs);
    if (!line) return;
    hold_shown_ = false;
    if (*line == "resume") return tell(daemon.post("run/resume", json::object()));
    if (*line == "stop")
      return tell(daemon.post("run/stop", {{"reason", "stopped from a hold at the terminal"}}));
    if (line->starts_with("skip"))
      return tell(daemon.post("run/skip", {{"reason", reason_after_skip(*line)}}));
  }

  void save_capture(const std::string& step_label) override {
    std::cout << "\nCapture wanted for step " << step_label
              << ": save it on the scope as CSV into the folder of the hook-up file.\n";
  }

 private:
  static void tell(const base::Outcome<json>& outcome) {
    if (!outcome) std::cout << "  " << outcome.refusal().text() << "\n> " << std::flush;
  }

  static std::string reason_after_skip(const std::string& line) {
    return line.size() > 5 ? line.substr(5) : "";
  }

  static void show(const json& prompt) {
    std::cout << "\n" << bold(prompt["text"].get<std::string>()) << "\n";
    for (const auto& caution : prompt["cautions"]) std::cout << "  ! " << caution.get<std::string>() << "\n";
    if (prompt["kind"] == "hand") {
      std::cout << "Type done and Enter when it is done, or skip and a reason.\n> " << std::flush;
      return;
    }
    if (prompt["kind"] == "confirm") {
      std::cout << "  " << prompt["why"].get<std::string>()
                << "\nType yes and Enter to keep it, or the value again.\n> " << std::flush;
      return;
    }
    std::cout
        << "Reading " << prompt["round"].get<int>() << " of " << prompt["rounds"].get<int>()
        << ". Type the value as it stands on the display, then range and weight of the last digit, in "
        << prompt["unit"].get<std::string>() << " (ranges: " << range_words(prompt)
        << "), for example: 385.1 V 600 0.1\nOr: skip and a reason; fix, then the value, to correct the "
           "one before.\n> "
        << std::flush;
  }

  static base::Outcome<json> answer_hand(const DaemonClient& daemon, std::int64_t id,
                                         const std::string& line) {
    if (line == "done") return daemon.post("prompt/answer", {{"prompt", id}, {"by", "terminal"}});
    if (line.starts_with("skip")) {
      return daemon.post("prompt/refuse", {{"prompt", id}, {"reason", reason_after_skip(line)}});
    }
    return base::Refusal{"", "type done, or skip and a reason"};
  }

  base::Outcome<json> answer_typed(const DaemonClient& daemon, const json& run, const std::string& line) {
    const json& prompt = run["prompt"];
    std::int64_t id = prompt["id"];
    if (line.starts_with("skip")) {
      return daemon.post("prompt/refuse", {{"prompt", id}, {"reason", reason_after_skip(line)}});
    }
    if (prompt["kind"] == "confirm" && line == "yes") {
      last_["confirmed"] = true;
      return daemon.post("prompt/typed", last_);
    }
    std::vector<std::string> words;
    std::string word;
    for (const char letter : line + " ") {
      if (letter != ' ') {
        word += letter;
      } else if (!word.empty()) {
        words.push_back(std::exchange(word, {}));
      }
    }
    if (!words.empty() && words.front() == "fix") {
      const json* earlier = nullptr;
      for (const auto& typed : run["typed"]) {
        if (!typed["superseded"].get<bool>()) earlier = &typed;
      }
      if (earlier == nullptr) return base::Refusal{"", "nothing was entered in this step yet"};
      id = (*earlier)["prompt"];
      words.erase(words.begin());
    }
    if (words.empty()) return base::Refusal{"", "type the value as it stands on the display"};
    // The unit may stand after the value; what follows are range and last digit, in the same unit.
    std::string unit = prompt["unit"];
    if (words.size() > 1 && std::isalpha(static_cast<unsigned char>(words[1].front())) != 0) {
      unit = words[1];
      words.erase(words.begin() + 1);
    }
    if (words.size() > 3) return base::Refusal{"", "type value, unit, range and last digit, and no more"};
    words.resize(3);
    last_ = {{"prompt", id},           {"value", words[0]},  {"unit", unit},    {"range", words[1]},
             {"last_digit", words[2]}, {"confirmed", false}, {"by", "terminal"}};
    return daemon.post("prompt/typed", last_);
  }

  LineInput input_;
  std::int64_t shown_ = 0;
  std::string shown_kind_;
  bool hold_shown_ = false;
  json last_;
};

std::string where(const json& run) {
  const int step = run["step"].get<int>();
  if (step < 0 || run["step_phase"] == "none") return "Run " + run["phase"].get<std::string>();
  return "Step " + base::print_integer(step + 1) + " of " + base::print_integer(run["steps"].get<int>()) +
         " (" + run["label"].get<std::string>() + "), " + run["step_phase"].get<std::string>();
}

/// What a run says about itself now, and what is new since the last look.
class Teller {
 public:
  void tell(const json& run) {
    for (const auto& trip : run["trips"])
      say(trip["at"].get<std::string>() + " guard " + trip["guard"].get<std::string>() + ": " +
          trip["text"].get<std::string>());
    for (const auto& warning : run["warnings"]) say(bold("WARNING ") + warning.get<std::string>());
    for (const auto& event : run["events"]) {
      if (worth_keeping(event["kind"]))
        say(event["source"].get<std::string>() + ": " + event["text"].get<std::string>());
    }
    // The time first: at the end of a long line it would be cut.
    std::string moving = run["waits_for"];
    if (run["remaining_s"].is_number()) {
      const double left_s = run["remaining_s"];
      moving =
          "still " + base::print_fixed(std::ceil(left_s), 0) + " s" + (moving.empty() ? "" : ", ") + moving;
    }
    progress_.show(where(run), moving);
  }
  void finish_line() { progress_.finish_line(); }

 private:
  /// What stays on the screen: whatever a person must have seen, above all whether the bench is safe.
  static bool worth_keeping(const json& kind) {
    static const std::set<std::string> kinds = {
        "safe state", "discharge",      "not settled",     "capture missing", "command_refused", "hold",
        "lost",       "identity wrong", "command refused", "record",          "broken"};
    return kinds.contains(kind.get<std::string>());
  }

  void say(const std::string& text) {
    if (!said_.insert(text).second) return;
    progress_.finish_line();
    std::cout << text << std::endl;
  }

  Progress progress_;
  std::set<std::string> said_;
};

bool has_ended(const json& run, std::int64_t number) {
  if (run["run"].get<std::int64_t>() != number) return true;
  const std::string phase = run["phase"];
  return phase == "done" || phase == "stopped" || phase == "idle";
}

}  // namespace

json final_result(const DaemonClient& daemon, std::int64_t run) {
  for (int look = 0;; ++look) {
    auto result = daemon.get("runs/" + base::print_integer(run));
    if (!result) throw std::runtime_error{result.refusal().text()};
    if ((*result)["state"] != "running" || look == kPatience) return *std::move(result);
    poll(nullptr, 0, kLookMs);
  }
}

std::unique_ptr<Person> person_at_terminal() {
  return std::make_unique<TerminalPerson>();
}

RunOutcome follow_run(const DaemonClient& daemon, std::int64_t number, Person& person) {
  Teller teller;
  bool capture_asked = false;
  bool asked_to_stop = false;
  int without_answer = 0;
  for (;;) {
    const auto state = daemon.get("state");
    if (!state) {
      if (++without_answer > kPatience) {
        throw std::runtime_error{
            state.refusal().text() +
            " The bench may still be on: start the daemon again, which makes it safe, or use the "
            "emergency stop."};
      }
      poll(nullptr, 0, kLookMs);
      continue;
    }
    without_answer = 0;
    const json& run = (*state)["run"];
    teller.tell(run);
    if (has_ended(run, number)) {
      teller.finish_line();
      RunOutcome outcome;
      outcome.done = run["phase"] == "done";
      outcome.reason = run["reason"];
      for (const auto& warning : run["warnings"]) outcome.warnings.push_back(warning);
      return outcome;
    }
    if (interrupted() && !asked_to_stop) {
      teller.finish_line();
      std::cout << "Stopping: safe state first." << std::endl;
      asked_to_stop = daemon.post("run/stop", {{"reason", "interrupted at the terminal"}}).ok();
    }
    // A capture is wanted again when the step was held and begins again.
    if (run["step_phase"] != "capture") {
      capture_asked = false;
    } else if (!std::exchange(capture_asked, true)) {
      person.save_capture(run["label"]);
    }
    if (asked_to_stop) {
      poll(nullptr, 0, kLookMs);
    } else if (run["prompt"].is_object()) {
      teller.finish_line();
      person.attend(daemon, run);
    } else if (run["phase"] == "holding") {
      teller.finish_line();
      person.decide_hold(daemon, run);
    } else {
      poll(nullptr, 0, kLookMs);
    }
  }
}

}  // namespace loadstair::command
