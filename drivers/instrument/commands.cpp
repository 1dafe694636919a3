// Settings, switching on, and the safe state.
#include <algorithm>
#include <cmath>
#include <utility>

#include "analysis/base/number.h"
#include "analysis/base/unit.h"
#include "drivers/dialect/scpi.h"
#include "drivers/dialect/text.h"
#include "drivers/instrument/instrument_impl.h"

namespace loadstair::instrument {
namespace {

using End = Conversation::End;

constexpr int kTries = 2;
constexpr std::int64_t kSafeRetryNs = 100'000'000;

std::int64_t ns_of(double seconds) {
  return static_cast<std::int64_t>(seconds * 1e9);
}

/// How switches answer: 1 or ON, 0 or OFF (SCPI-1999 volume 1, 7.3).
std::optional<double> read_switch(std::string_view text) {
  if (text.size() == 2 && dialect::begins_with_word(text, "on")) return 1.0;
  if (text.size() == 3 && dialect::begins_with_word(text, "off")) return 0.0;
  return base::parse_number(text);
}

std::string in_unit(double value, const std::string& unit) {
  const auto number = dialect::write_number(value);
  return unit.empty() ? number : number + " " + unit;
}

}  // namespace

std::string Instrument::Impl::describe(const Job& job) const {
  const auto& name = settings_.name;
  if (job.setting != nullptr)
    return name + ": " + job.setting->name + " to " + in_unit(job.value, job.setting->unit);
  return name + (&job == safe_.get() ? ": safe state" : ": switching on");
}

net::awaitable<CommandOutcome> Instrument::Impl::apply(std::string setting, double value) {
  const auto found = std::find_if(profile_.settings.begin(), profile_.settings.end(),
                                  [&setting](const ProfileSetting& s) { return s.name == setting; });
  CommandOutcome refused{CommandState::refused, {}, {}};
  if (found == profile_.settings.end()) {
    refused.text = settings_.name + ": its profile has no setting \"" + setting + "\"";
    co_return refused;
  }
  if (const auto command = dialect::write_command(found->command, value); !command) {
    refused.text = settings_.name + ": " + command.refusal().text();
    co_return refused;
  }
  co_return co_await enqueue(&*found, value);
}

net::awaitable<CommandOutcome> Instrument::Impl::switch_on() {
  if (profile_.on_commands.empty()) {
    CommandOutcome refused{
        CommandState::refused, settings_.name + ": its profile has no commands to switch on", {}};
    co_return refused;
  }
  co_return co_await enqueue(nullptr, 0.0);
}

net::awaitable<CommandOutcome> Instrument::Impl::enqueue(const ProfileSetting* setting, double value) {
  const auto job = std::make_shared<Job>();
  job->setting = setting;
  job->value = value;
  job->deadline_ns = clock_.now_ns() + ns_of(settings_.command_limit_s);
  if (safe_) {
    finish(job, CommandState::refused, "not sent, since it is being made safe");
  } else if (state_ == State::stopped) {
    finish(job, CommandState::unreachable, "the instrument is no longer served");
  } else {
    waiting_.push_back(job);
    wake_.notify();
  }
  co_return co_await wait_for(job);
}

net::awaitable<CommandOutcome> Instrument::Impl::wait_for(JobPointer job) {
  const auto notice = std::make_shared<link::Notice>(clock_, executor_);
  job->waiters.push_back(notice);
  // Whoever waited may be cancelled: what nobody expects any more is not sent. The safe state goes on.
  struct Withdraw {
    Impl& impl;
    const JobPointer& job;
    ~Withdraw() {
      if (job->outcome || job == impl.safe_) return;
      std::erase(impl.waiting_, job);
      job->outcome = CommandOutcome{CommandState::unreachable, "withdrawn", {}};
    }
  } const withdraw{*this, job};
  while (!job->outcome && clock_.now_ns() < job->deadline_ns) co_await notice->wait_until(job->deadline_ns);
  if (!job->outcome) {
    // Never to be sent later, when nobody expects it any more.
    std::erase(waiting_, job);
    finish(job, CommandState::unreachable,
           (job == safe_ ? "NOT CONFIRMED in time, make it safe by hand" : "no confirmation in time") +
               std::string{"; the instrument is "} + std::string{name_of(state())});
  }
  co_return *job->outcome;
}

void Instrument::Impl::finish(const JobPointer& job, CommandState state, std::string text,
                              std::optional<double> read_back) {
  if (job->outcome) return;
  const auto what = describe(*job);
  job->outcome = CommandOutcome{state, text.empty() ? what : what + ": " + text, read_back};
  if (state == CommandState::refused || state == CommandState::unreachable) {
    tell(EventKind::command_refused, job->outcome->text);
  }
  if (job == safe_) {
    safe_.reset();
    safe_owed_ = state != CommandState::confirmed && state != CommandState::sent;
  }
  for (const auto& waiter : job->waiters) waiter->notify();
}

void Instrument::Impl::finish_waiting(CommandState state, const std::string& text) {
  for (const auto& job : std::exchange(waiting_, {})) finish(job, state, text);
  if (const auto job = std::exchange(at_work_, nullptr)) finish(job, state, text);
  if (state == CommandState::unreachable && safe_) finish(JobPointer{safe_}, state, text);
}

/// Returns: false when the link has gone.
net::awaitable<bool> Instrument::Impl::do_job() {
  at_work_ = waiting_.front();
  waiting_.pop_front();
  const auto job = at_work_;
  bool linked = false;
  if (job->setting != nullptr) {
    linked = co_await do_set(job);
  } else {
    linked = co_await do_switch_on(job);
  }
  if (at_work_ == job) at_work_.reset();
  if (!linked) finish(job, CommandState::unreachable, "the link was lost before it was confirmed");
  co_return linked;
}

net::awaitable<Instrument::Impl::ReadBack> Instrument::Impl::read_back(std::string query) {
  const auto answer = co_await ask_in_step(query);
  ReadBack result;
  if (answer.end == End::closed) {
    result.link_lost = true;
    co_return result;
  }
  deliver(answer, query, {});
  if (answer.end == End::answered) {
    result.text = dialect::trim(answer.text);
  } else {
    tell(EventKind::timeout, "no reply to " + query + " in time");
    const bool in_step = co_await back_in_step();
    result.link_lost = !in_step;
  }
  co_return result;
}

CommandOutcome Instrument::Impl::judge_read_back(const Job& job, const std::string& text) const {
  const auto& setting = *job.setting;
  std::optional<double> said = setting.unit.empty() ? read_switch(text) : std::nullopt;
  if (!setting.unit.empty()) {
    const auto field =
        dialect::read_field(text, setting.unit, {profile_.overload_words, profile_.overload_at});
    const auto unit = base::parse_unit(setting.unit).value_or(base::ParsedUnit{});
    if (field.quality == dialect::Quality::good) said = field.value / unit.scale;
  }
  // The last bit of a tolerance that is met exactly is not to decide.
  const double tolerance = setting.tolerance + 1e-9 * std::abs(job.value);
  if (said && std::abs(*said - job.value) <= tolerance) return {CommandState::confirmed, "confirmed", said};
  return {CommandState::refused, "read back as '" + dialect::printable(text) + "'", said};
}

net::awaitable<bool> Instrument::Impl::do_set(JobPointer job) {
  const auto& setting = *job->setting;
  const auto command = dialect::write_command(setting.command, job->value);
  CommandOutcome judged{CommandState::refused, "no reply to " + setting.readback, {}};
  for (int attempt = 0; attempt < kTries && !job->outcome; ++attempt) {
    tell(EventKind::command_sent, *command);
    const bool written = co_await talk_.say(*command);
    if (!written) {
      lose(talk_.link()->name() + ": the link closed at " + *command);
      co_return false;
    }
    if (setting.readback.empty()) {
      finish(job, CommandState::sent, "sent; it cannot be read back");
      co_return true;
    }
    const auto said = co_await read_back(setting.readback);
    if (said.link_lost) co_return false;
    if (said.text) judged = judge_read_back(*job, *said.text);
    if (judged.state == CommandState::confirmed) break;
  }
  finish(job, judged.state, judged.text, judged.read_back);
  co_return true;
}

net::awaitable<bool> Instrument::Impl::do_switch_on(JobPointer job) {
  for (const auto& command : profile_.on_commands) {
    if (job->outcome) co_return true;  // overtaken by the safe state
    tell(EventKind::command_sent, command);
    const bool written = co_await talk_.say(command);
    if (!written) {
      lose(talk_.link()->name() + ": the link closed at " + command);
      co_return false;
    }
  }
  if (!profile_.safe || profile_.safe->confirm_query.empty()) {
    finish(job, CommandState::sent, "sent; it cannot be read back");
    co_return true;
  }
  co_return co_await confirm_on(job);
}

/// Only a reply that reads as on confirms: any other may belong to another query, so it is asked again in
/// step.
net::awaitable<bool> Instrument::Impl::confirm_on(JobPointer job) {
  const std::string& query = profile_.safe->confirm_query;
  std::string last_said;
  for (int attempt = 0; attempt < kTries && !job->outcome; ++attempt) {
    if (attempt > 0) {
      const bool in_step = co_await back_in_step();
      if (!in_step) co_return false;
      if (job->outcome) co_return true;
    }
    const auto said = co_await read_back(query);
    if (said.link_lost) co_return false;
    if (!said.text) {
      finish(job, CommandState::refused, "no reply to " + query);
    } else if (is_safe_reply(*said.text)) {
      finish(job, CommandState::refused, "it still answers '" + dialect::printable(*said.text) + "'");
    } else if (is_on_reply(*said.text)) {
      finish(job, CommandState::confirmed, "confirmed");
    } else {
      last_said = *said.text;
    }
  }
  finish(job, CommandState::refused,
         "it answers '" + dialect::printable(last_said) + "' to " + query + ", which is neither on nor off");
  co_return true;
}

bool Instrument::Impl::is_on_reply(std::string_view text) const {
  const auto said = read_switch(text);
  return said && *said != read_switch(dialect::trim(profile_.safe->confirm_reply)).value_or(0.0);
}

bool Instrument::Impl::is_safe_reply(std::string_view text) const {
  const std::string_view wanted = dialect::trim(profile_.safe->confirm_reply);
  if (text.size() == wanted.size() && dialect::begins_with_word(text, wanted)) return true;
  const auto said = read_switch(text);
  return said && said == read_switch(wanted);
}

net::awaitable<CommandOutcome> Instrument::Impl::make_safe() {
  if (!profile_.safe) {
    CommandOutcome refused{CommandState::refused, settings_.name + ": its profile has no safe commands", {}};
    co_return refused;
  }
  if (!safe_) {
    safe_ = std::make_shared<Job>();
    safe_owed_ = true;
    safe_->deadline_ns = clock_.now_ns() + ns_of(settings_.safe_limit_s);
    // A set point that waits must not go out after the safe state.
    finish_waiting(CommandState::refused, "not sent or not confirmed, since it is being made safe");
  }
  const auto job = safe_;
  if (state_ == State::stopped) finish(job, CommandState::unreachable, "the instrument is no longer served");
  if (!job->outcome && !job->written && talk_.identified()) {
    job->resynchronise_first = talk_.unsettled();
    co_await write_safe(job);
  }
  wake_.notify();
  co_return co_await wait_for(job);
}

net::awaitable<bool> Instrument::Impl::write_safe(JobPointer job) {
  job->written = true;
  std::string bytes;
  for (const auto& command : profile_.safe->commands) {
    bytes += command + profile_.terminator;
    tell(EventKind::command_sent, command);
  }
  const bool written = co_await talk_.interject(std::move(bytes));
  job->written = job->written && written;
  co_return written;
}

/// Returns: false when the link has gone; the job goes on over the next one.
net::awaitable<bool> Instrument::Impl::do_safe() {
  const auto job = safe_;
  std::string last_said = "no reply to " + profile_.safe->confirm_query;
  while (!job->outcome && !stopping_) {
    if (job->resynchronise_first) {
      const bool in_step = co_await back_in_step();
      if (!in_step) co_return false;
      job->resynchronise_first = false;
      job->written = false;
    }
    if (!job->written) {
      const bool written = co_await write_safe(job);
      if (!written) {
        lose(talk_.link()->name() + ": the link closed at the safe commands");
        co_return false;
      }
    }
    if (profile_.safe->confirm_query.empty()) {
      finish(job, CommandState::sent, "sent; it cannot be read back");
      co_return true;
    }
    const auto said = co_await read_back(profile_.safe->confirm_query);
    if (said.link_lost) co_return false;
    if (said.text && is_safe_reply(*said.text)) {
      finish(job, CommandState::confirmed, "confirmed");
      co_return true;
    }
    if (said.text) last_said = "it answers '" + dialect::printable(*said.text) + "'";
    job->written = false;
    // An answer that is none of ours may belong to another query.
    job->resynchronise_first = true;
    if (clock_.now_ns() + kSafeRetryNs >= job->deadline_ns) {
      finish(job, CommandState::refused, "NOT CONFIRMED: " + last_said + ". Make it safe by hand");
      co_return true;
    }
    co_await clock_.sleep_for(std::chrono::nanoseconds{kSafeRetryNs});
  }
  co_return !stopping_;
}

}  // namespace loadstair::instrument
