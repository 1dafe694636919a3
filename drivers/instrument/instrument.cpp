#include "drivers/instrument/instrument.h"

#include <algorithm>
#include <utility>

#include "analysis/base/number.h"
#include "analysis/base/require.h"
#include "drivers/dialect/scpi.h"
#include "drivers/dialect/text.h"
#include "drivers/instrument/instrument_impl.h"
#include "drivers/instrument/profile_check.h"

namespace loadstair::instrument {
namespace {

using End = Conversation::End;
using Recognised = Conversation::Recognised;
using link::Status;

constexpr std::int64_t kMilliNs = 1'000'000;
constexpr std::int64_t kSecondNs = 1'000'000'000;
// An instrument without queries is asked who it is this often, so that a lost link is noticed.
constexpr std::int64_t kPresenceNs = kSecondNs;
// Lines are missing after five of their periods, and the link is opened anew after five times that.
constexpr std::int64_t kSilentPeriods = 5;
constexpr int kSilencesToLoss = 5;
constexpr std::int64_t kSilenceLeastNs = 2 * kSecondNs;
constexpr double kOwedRetryMostS = 1.0;
constexpr std::int64_t kSilenceUnknownNs = 10 * kSecondNs;

std::int64_t ns_of(double seconds) {
  return static_cast<std::int64_t>(seconds * 1e9);
}

std::string seconds(double s) {
  return dialect::write_number(s) + " s";
}

/// Keeps `owner` for as long as the coroutine's frame exists, finished or not.
template <class Owner, class T>
net::awaitable<T> hold([[maybe_unused]] std::shared_ptr<Owner> owner, net::awaitable<T> work) {
  co_return co_await std::move(work);
}

Profile checked(Profile profile) {
  const auto sound = check_profile(profile);
  base::require(sound.ok(), "an instrument is made from a checked profile");
  return profile;
}

}  // namespace

std::string_view name_of(State state) {
  switch (state) {
    case State::idle:
      return "idle";
    case State::connecting:
      return "connecting";
    case State::wrong_identity:
      return "wrong identity";
    case State::ready:
      return "ready";
    case State::resynchronising:
      return "resynchronising";
    case State::stopped:
      return "stopped";
  }
  return "unknown";
}

Instrument::Impl::Impl(net::any_io_executor executor, link::Clock& clock, link::Opener opener,
                       Profile profile, InstrumentSettings settings, Sink& sink)
    : executor_{std::move(executor)},
      clock_{clock},
      opener_{std::move(opener)},
      profile_{checked(std::move(profile))},
      settings_{std::move(settings)},
      sink_{sink},
      talk_{executor_, clock, profile_, settings_.identity,
            [this](EventKind kind, std::string text) { tell(kind, std::move(text)); }},
      interpreter_{profile_, settings_,
                   [this](EventKind kind, std::string text) { tell(kind, std::move(text)); }},
      wake_{clock, executor_} {}

State Instrument::Impl::state() const {
  return state_ == State::ready && talk_.resynchronising() ? State::resynchronising : state_;
}

void Instrument::Impl::abandon() {
  abandoned_ = true;
  stopping_ = true;
  talk_.close();
}

void Instrument::Impl::tell(EventKind kind, std::string text) {
  if (abandoned_) return;
  sink_.on_event({clock_.now_ns(), kind, std::move(text)});
}

/// Told once, however often the same comes again before a connection succeeds.
void Instrument::Impl::lose(std::string why) {
  if (stopping_ || why == last_trouble_) return;
  last_trouble_ = why;
  tell(EventKind::lost, std::move(why));
}

void Instrument::Impl::stop() {
  stopping_ = true;
  talk_.close();
  wake_.notify();
  if (!began_) state_ = State::stopped;
}

net::awaitable<void> Instrument::Impl::pause(std::int64_t length_ns) {
  const auto until_ns = clock_.now_ns() + length_ns;
  const auto hurry = safe_;  // a safe command that comes while we wait ends the wait, once
  while (clock_.now_ns() < until_ns && !stopping_ && safe_ == hurry) co_await wake_.wait_until(until_ns);
}

net::awaitable<void> Instrument::Impl::run() {
  base::require(!began_, "an instrument runs once");
  began_ = true;
  struct AtEnd {
    Impl& impl;
    ~AtEnd() {
      impl.state_ = State::stopped;
      impl.talk_.close();
      impl.finish_waiting(CommandState::unreachable, "the instrument is no longer served");
    }
  } const at_end{*this};

  auto retry_s = settings_.retry_s;
  while (!stopping_) {
    if (state_ != State::wrong_identity) state_ = State::connecting;
    auto opened = co_await opener_();
    if (stopping_) break;
    if (opened.ok()) {
      talk_.begin(std::move(*opened));
      const bool served = co_await converse();
      talk_.close();
      if (served && !stopping_) {
        retry_s = settings_.retry_s;
        const auto now_ns = clock_.now_ns();
        sink_.on_exchange({now_ns, now_ns, {}, {}, interpreter_.all_missing(now_ns)});
      }
    } else {
      lose(opened.refusal().text());
    }
    if (stopping_) break;
    if (state_ != State::wrong_identity) state_ = State::connecting;
    // Nobody knows whether it is on: looked for often until its safe state is read back, however long it
    // takes.
    const double wait_s = safe_owed_ ? std::min(settings_.retry_s, kOwedRetryMostS) : retry_s;
    co_await pause(ns_of(wait_s));
    retry_s = std::min(2 * retry_s, settings_.retry_most_s);
  }
}

/// Returns: the instrument was recognised and served.
net::awaitable<bool> Instrument::Impl::converse() {
  if (profile_.dialect == Dialect::text_lines) co_return co_await serve_lines();
  const bool recognised = co_await recognise();
  if (!recognised) co_return false;
  state_ = State::ready;
  last_trouble_.clear();
  tell(EventKind::connected, talk_.link()->name() + ": " + talk_.identity());
  if (safe_) {
    safe_->written = false;
    safe_->resynchronise_first = false;
    const bool linked = co_await do_safe();
    if (!linked) co_return true;
  }
  const bool started = co_await send_start_commands();
  if (started) co_await serve_queries();
  co_return true;
}

net::awaitable<bool> Instrument::Impl::recognise() {
  const auto recognised = co_await talk_.identify();
  const auto name = talk_.link()->name();
  switch (recognised) {
    case Recognised::matched:
      co_return true;
    case Recognised::closed:
      lose(name + ": the link closed before " + profile_.identity_query + " was answered");
      break;
    case Recognised::silent:
      lose(name + ": no reply to " + profile_.identity_query +
           "; is it on, set to remote, and at this rate?");
      break;
    case Recognised::wrong: {
      const auto trouble = name + ": '" + talk_.identity() + "' answers instead of '" + settings_.identity +
                           "'; nothing is read from it and nothing is sent to it. Are two cables swapped?";
      state_ = State::wrong_identity;
      if (trouble != last_trouble_) tell(EventKind::identity_wrong, trouble);
      last_trouble_ = trouble;
      co_return false;
    }
  }
  state_ = State::connecting;
  co_return false;
}

net::awaitable<bool> Instrument::Impl::send_start_commands() {
  for (const auto& command : profile_.start_commands) {
    if (stopping_ || safe_) co_return !stopping_;
    if (command.find('?') == std::string::npos) {
      const bool written = co_await talk_.say(command);
      if (!written) {
        lose(talk_.link()->name() + ": the link closed at " + command);
        co_return false;
      }
      continue;
    }
    const auto answer = co_await ask_in_step(command);
    if (answer.end == End::closed) co_return false;
    deliver(answer, command, {});
    if (answer.end == End::answered) continue;
    const bool in_step = co_await back_in_step();
    if (!in_step) co_return false;
  }
  co_return true;
}

net::awaitable<void> Instrument::Impl::serve_queries() {
  const auto period_ns = profile_.queries.empty() ? std::max(ns_of(settings_.poll_s), kPresenceNs)
                                                  : std::max(ns_of(settings_.poll_s), kMilliNs);
  // The next multiple of the period from an instant on: a slow round leaves some out and never shifts the
  // rest.
  const auto next_tick = [period_ns](std::int64_t from_ns) {
    return (from_ns + period_ns - 1) / period_ns * period_ns;
  };
  tick_ns_ = next_tick(clock_.now_ns());
  while (!stopping_) {
    if (safe_) {
      const bool linked = co_await do_safe();
      if (!linked) co_return;
      continue;
    }
    if (!waiting_.empty()) {
      const bool linked = co_await do_job();
      if (!linked) co_return;
      continue;
    }
    if (clock_.now_ns() < tick_ns_) {
      co_await wake_.wait_until(tick_ns_);
      continue;
    }
    const bool linked = co_await round();
    if (!linked) co_return;
    tick_ns_ = next_tick(std::max(tick_ns_ + 1, clock_.now_ns()));
  }
}

/// A question that is asked only when the line is in step. Closed: told, and of no further use.
net::awaitable<Conversation::Answer> Instrument::Impl::ask_in_step(std::string query) {
  auto answer = co_await talk_.ask(query);
  if (answer.end == End::out_of_step) {
    const bool in_step = co_await back_in_step();
    if (in_step) answer = co_await talk_.ask(query);
    if (!in_step || answer.end == End::out_of_step) answer.end = End::closed;
  }
  if (answer.end == End::closed) lose(talk_.link()->name() + ": the link closed; cable, or switched off?");
  co_return answer;
}

net::awaitable<bool> Instrument::Impl::back_in_step() {
  const bool in_step = co_await talk_.resynchronise();
  if (!in_step) {
    lose(talk_.link()->name() +
         ": does not say who it is after a lost or unreadable reply; the link is opened anew");
  }
  co_return in_step;
}

void Instrument::Impl::deliver(const Conversation::Answer& answer, std::string query,
                               std::vector<Reading> readings) {
  sink_.on_exchange({answer.sent_ns, answer.last_ns, std::move(query), answer.text, std::move(readings)});
}

net::awaitable<bool> Instrument::Impl::ask_query(std::size_t query) {
  const auto& text = profile_.queries[query].text;
  const auto answer = co_await ask_in_step(text);
  if (stopping_) co_return false;
  const auto asked_ns = answer.sent_ns != 0 ? answer.sent_ns : clock_.now_ns();
  const auto ended_ns = answer.first_ns != 0 ? answer.first_ns : clock_.now_ns();
  const auto instant = interpreter_.instant_of_reply(asked_ns, ended_ns);
  switch (answer.end) {
    case End::answered: {
      auto reply = interpreter_.read_reply(query, answer.text, instant);
      if (!strange_function_.empty()) {
        for (auto& reading : reply.readings) reading.flags |= kUnitChanged;
      }
      deliver(answer, text, std::move(reply.readings));
      if (reply.readable) co_return true;
      break;
    }
    case End::unreadable:
      tell(EventKind::garbage, "a reply without end to " + text + "; is the rate right?");
      deliver(answer, text, interpreter_.absent(query, instant, kInvalid));
      break;
    case End::timeout:
      tell(EventKind::timeout, "no reply to " + text + " within " + seconds(profile_.timeout_s));
      deliver(answer, text, interpreter_.absent(query, instant, kMissing));
      break;
    case End::out_of_step:
    case End::closed:
      co_return false;
  }
  co_return co_await back_in_step();
}

net::awaitable<bool> Instrument::Impl::serve_lines() {
  const auto period_ns = ns_of(settings_.update_s) * kSilentPeriods;
  const auto silence_ns = period_ns > 0 ? std::max(period_ns, kSilenceLeastNs) : kSilenceUnknownNs;
  const auto name = talk_.link()->name();
  bool first = true;
  bool recognised = false;
  int silences = 0;
  interpreter_.begin(clock_.now_ns());
  while (!stopping_ && silences < kSilencesToLoss) {
    const auto line = co_await talk_.link()->read_line(profile_.terminator, clock_.now_ns() + silence_ns);
    if (stopping_) co_return recognised;
    const auto now_ns = clock_.now_ns();
    Exchange exchange{line.first_ns, line.last_ns, {}, line.bytes, {}};
    silences = line.status == Status::timeout ? silences + 1 : 0;
    if (line.status == Status::closed) {
      lose(name + ": the link closed; cable, or switched off?");
      co_return recognised;
    }
    if (line.status == Status::too_long) tell(EventKind::garbage, "a line without end; is the rate right?");
    // The first line may be the end of one that began before we listened.
    if (line.status == Status::done && !std::exchange(first, false) && !dialect::trim(line.bytes).empty()) {
      exchange.readings =
          interpreter_.read_line(line.bytes, interpreter_.instant_of_line(line.first_ns, line.last_ns));
      if (!exchange.readings.empty() && !recognised) {
        recognised = true;
        state_ = State::ready;
        last_trouble_.clear();
        tell(EventKind::connected, name);
      }
      sink_.on_exchange(exchange);
    }
    exchange = {now_ns, now_ns, {}, {}, interpreter_.silent_values(now_ns, silence_ns)};
    if (!exchange.readings.empty()) sink_.on_exchange(exchange);
  }
  lose(name + ": silent; the link is opened anew");
  co_return recognised;
}

Instrument::Instrument(net::any_io_executor executor, link::Clock& clock, link::Opener opener,
                       Profile profile, InstrumentSettings settings, Sink& sink)
    : impl_{std::make_shared<Impl>(std::move(executor), clock, std::move(opener), std::move(profile),
                                   std::move(settings), sink)} {}
Instrument::~Instrument() {
  impl_->abandon();
}

net::awaitable<void> Instrument::run() {
  return hold(impl_, impl_->run());
}
net::awaitable<CommandOutcome> Instrument::apply(std::string setting, double value) {
  return hold(impl_, impl_->apply(std::move(setting), value));
}
net::awaitable<CommandOutcome> Instrument::switch_on() {
  return hold(impl_, impl_->switch_on());
}
net::awaitable<CommandOutcome> Instrument::make_safe() {
  return hold(impl_, impl_->make_safe());
}
void Instrument::stop() {
  impl_->stop();
}
State Instrument::state() const {
  return impl_->state();
}
const std::string& Instrument::identity() const {
  return impl_->identity();
}
const Profile& Instrument::profile() const {
  return impl_->profile();
}
const InstrumentSettings& Instrument::settings() const {
  return impl_->settings();
}

}  // namespace loadstair::instrument
