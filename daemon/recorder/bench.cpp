#include "daemon/recorder/bench.h"

#include <algorithm>
#include <cmath>
#include <utility>

#include "daemon/evaluation/live.h"
#include "daemon/recorder/bench_state.h"
#include "daemon/recorder/real_links.h"

namespace loadstair::recorder {
namespace {

using base::Outcome;
using base::Refusal;
using boost::asio::awaitable;

/// Before an instrument that failed is connected again.
constexpr std::chrono::milliseconds kServeAgain{250};

/// The profile with the queries whose values are used; the first one stays, so that a loss is noticed. Lines
/// that nobody uses may stay away.
instrument::Profile asked_only(instrument::Profile profile, const std::set<std::string>& used) {
  for (auto& value : profile.values) value.expected = used.empty() || used.contains(value.name);
  if (profile.queries.size() < 2) return profile;
  std::vector<instrument::ProfileQuery> kept;
  for (const auto& query : profile.queries) {
    const bool wanted = std::any_of(query.values.begin(), query.values.end(),
                                    [&used](const std::string& value) { return used.contains(value); });
    if (wanted) kept.push_back(query);
  }
  if (kept.empty()) kept.push_back(profile.queries.front());
  profile.queries = std::move(kept);
  return profile;
}

instrument::InstrumentSettings settings_of(const setup::Instrument& declared, const BenchOptions& options) {
  instrument::InstrumentSettings settings;
  settings.name = declared.name;
  settings.identity = declared.identity;
  settings.poll_s = declared.poll_s;
  settings.update_s = declared.update_s;
  settings.integration_s = declared.integration_s;
  settings.delay_s = declared.delay_s;
  settings.safe_limit_s = options.safe_limit_s;
  return settings;
}

}  // namespace

std::string said(const std::exception_ptr& failure) {
  try {
    std::rethrow_exception(failure);
  } catch (const std::exception& error) {
    return error.what();
  } catch (...) {
    return "an exception of an unknown kind";
  }
}

Bench::State::State(setup::Hookup the_hookup, link::Clock& the_clock,
                    boost::asio::any_io_executor the_executor, store::Writer& the_writer,
                    BenchOptions the_options)
    : hookup{std::move(the_hookup)},
      clock{the_clock},
      executor{std::move(the_executor)},
      writer{the_writer},
      options{std::move(the_options)},
      polls{executor,
            [this](std::exception_ptr failure) {
              tell_fault("broken", "instruments", "a poll loop ended: " + said(failure));
            }},
      watches{executor,
              [this](std::exception_ptr failure) {
                tell_fault("broken", "recorder", "a watch ended: " + said(failure));
              }},
      windows(hookup.channels.size(), Window{options.window_readings}),
      last_usable(hookup.channels.size()) {}

void Bench::State::build() {
  for (std::size_t place = 0; place < hookup.instruments.size(); ++place) {
    const auto& declared = hookup.instruments[place];
    auto one = std::make_unique<Owned>();
    one->bench = this;
    one->place = place;
    if (declared.link.kind == setup::LinkKind::folder) {
      one->folder = std::make_shared<FolderWatch>(beside(hookup.file, declared.link.path));
      owned.push_back(std::move(one));
      continue;
    }
    std::set<std::string> used;
    one->channels_of.resize(declared.profile.values.size());
    for (std::size_t channel = 0; channel < hookup.channels.size(); ++channel) {
      const auto& wanted = hookup.channels[channel];
      if (wanted.typed || wanted.instrument != declared.name) continue;
      used.insert(wanted.value);
      for (std::size_t value = 0; value < declared.profile.values.size(); ++value) {
        if (declared.profile.values[value].name == wanted.value) {
          one->channels_of[value].push_back(static_cast<std::int32_t>(channel));
        }
      }
    }
    one->profile = asked_only(declared.profile, used);
    make_instrument(*one);
    owned.push_back(std::move(one));
  }
}

void Bench::State::make_instrument(Owned& one) {
  const auto& declared = hookup.instruments[one.place];
  auto opener =
      options.opener_for ? options.opener_for(declared) : real_opener(clock, hookup.file, declared.link);
  one.instrument = std::make_unique<instrument::Instrument>(executor, clock, std::move(opener), one.profile,
                                                            settings_of(declared, options), one);
}

/// A fault in the poll loop ends the run, not the service: the instrument must still hear its safe command.
/// It is made anew before anybody hears of the fault, so that a command given at once waits for the link.
awaitable<void> Bench::State::serve(std::size_t place) {
  const auto self = shared_from_this();
  auto& one = *owned[place];
  while (!closed) {
    std::string failure;
    try {
      co_await one.instrument->run();
    } catch (...) {
      failure = said(std::current_exception());
    }
    if (closed || failure.empty()) co_return;
    make_instrument(one);
    tell_fault(std::string{kInstrumentFailed}, hookup.instruments[place].name,
               "a fault of the program ended its poll loop (" + failure + "); it is connected anew");
    co_await clock.sleep_for(kServeAgain);
  }
}

/// A listener that throws once more must not make a second fault of the first one.
void Bench::State::tell_fault(std::string kind, std::string source, std::string text) {
  try {
    tell(clock.now_ns(), std::move(kind), std::move(source), std::move(text), std::nullopt);
    instrument_callbacks.call();
  } catch (...) {
    return;  // the event was posted before the listeners heard of it
  }
}

instrument::Instrument* Bench::State::instrument_of(std::string_view control) const {
  for (const auto& declared : hookup.controls) {
    if (declared.name != control) continue;
    for (const auto& one : owned) {
      if (hookup.instruments[one->place].name == declared.instrument) return one->instrument.get();
    }
  }
  return nullptr;
}

Bench::Bench(setup::Hookup hookup, link::Clock& clock, boost::asio::any_io_executor executor,
             store::Writer& writer, BenchOptions options)
    : state_{std::make_shared<State>(std::move(hookup), clock, std::move(executor), writer,
                                     std::move(options))} {
  state_->build();
}

Bench::~Bench() {
  state_->closed = true;
}

void Bench::start() {
  for (std::size_t place = 0; place < state_->owned.size(); ++place) {
    if (state_->owned[place]->folder) {
      state_->watches.spawn(state_->watch_folder(place));
    } else {
      state_->polls.spawn(state_->serve(place));
    }
  }
  state_->watches.spawn(state_->watch_clock());
}

awaitable<void> Bench::close() {
  const auto state = state_;
  state->closed = true;
  for (const auto& one : state->owned) {
    if (one->instrument) one->instrument->stop();
  }
  co_await state->polls.join();
  co_await state->watches.close();
}

const setup::Hookup& Bench::hookup() const {
  return state_->hookup;
}
link::Clock& Bench::clock() const {
  return state_->clock;
}
store::Writer& Bench::writer() const {
  return state_->writer;
}
boost::asio::any_io_executor Bench::executor() const {
  return state_->executor;
}

void Bench::in_background(std::function<void()> job, std::function<void()> done) {
  state_->in_background(std::move(job), std::move(done));
}

std::vector<std::string> words_of(std::uint32_t flags) {
  static constexpr std::pair<instrument::Flag, const char*> kWords[] = {
      {instrument::kOverload, "overload"},
      {instrument::kInvalid, "no number"},
      {instrument::kStale, "old reply repeated"},
      {instrument::kUnitChanged, "unit changed"},
      {instrument::kRangeChanged, "range changed"},
      {instrument::kTyped, "typed"},
      {instrument::kImplausible, "implausible, confirmed"},
      {instrument::kSuperseded, "superseded"},
      {instrument::kMissing, "no reply"},
  };
  std::vector<std::string> words;
  for (const auto& [flag, word] : kWords) {
    if ((flags & flag) != 0U) words.emplace_back(word);
  }
  return words;
}

std::vector<ChannelNow> Bench::channels() const {
  std::vector<ChannelNow> shown;
  const auto now = state_->clock.now_ns();
  for (std::size_t channel = 0; channel < state_->hookup.channels.size(); ++channel) {
    const auto& declared = state_->hookup.channels[channel];
    ChannelNow one;
    one.name = declared.name;
    one.unit = declared.unit;
    one.typed = declared.typed;
    one.instrument = declared.typed ? "" : declared.instrument;
    const auto& usable = state_->last_usable[channel];
    if (usable.arrived_ns != 0) {
      one.value = usable.value;
      one.age_s = static_cast<double>(now - usable.t_ns) * 1e-9;
      one.half_width_s = static_cast<double>(usable.half_width_ns) * 1e-9;
    }
    if (!state_->windows[channel].empty()) {
      const auto last = state_->windows[channel].back();
      one.flags = last.flags;
      one.words = words_of(last.flags);
      if (!std::isfinite(last.value) && (last.flags & instrument::kUnusable) == 0U) {
        one.words.emplace_back("beyond the sensor's range");
      }
    }
    shown.push_back(std::move(one));
  }
  return shown;
}

std::vector<InstrumentNow> Bench::instruments() const {
  std::vector<InstrumentNow> shown;
  for (const auto& one : state_->owned) {
    const auto& declared = state_->hookup.instruments[one->place];
    InstrumentNow now;
    now.name = declared.name;
    now.link = describe(declared.link);
    if (one->instrument) {
      const auto state = one->instrument->state();
      now.state = instrument::name_of(state);
      // Out of step for a moment, it still takes commands: they wait until the line is in step again.
      now.ready = state == instrument::State::ready || state == instrument::State::resynchronising;
      now.identity = one->instrument->identity();
    } else {
      now.state = "watching folder";
    }
    shown.push_back(std::move(now));
  }
  return shown;
}

std::optional<std::size_t> Bench::find_channel(std::string_view name) const {
  const auto& channels = state_->hookup.channels;
  const auto found =
      std::find_if(channels.begin(), channels.end(), [name](const auto& one) { return one.name == name; });
  if (found == channels.end()) return std::nullopt;
  return static_cast<std::size_t>(found - channels.begin());
}

const Window& Bench::window(std::size_t channel) const {
  return state_->windows.at(channel);
}

std::vector<BenchEvent> Bench::recent_events() const {
  return {state_->events.begin(), state_->events.end()};
}

std::size_t Bench::captures_of_step(std::int32_t step) const {
  const auto found = state_->captures.find(step);
  return found == state_->captures.end() ? 0 : found->second;
}

Bench::Listener Bench::on_reading(std::function<void(const ChannelUpdate&)> callback) {
  state_->reading_callbacks.add(state_->next_listener, std::move(callback));
  return state_->next_listener++;
}
Bench::Listener Bench::on_event(std::function<void(const BenchEvent&)> callback) {
  state_->event_callbacks.add(state_->next_listener, std::move(callback));
  return state_->next_listener++;
}
Bench::Listener Bench::on_capture(std::function<void(const CaptureArrived&)> callback) {
  state_->capture_callbacks.add(state_->next_listener, std::move(callback));
  return state_->next_listener++;
}
Bench::Listener Bench::on_instrument(std::function<void()> callback) {
  state_->instrument_callbacks.add(state_->next_listener, std::move(callback));
  return state_->next_listener++;
}

void Bench::forget(Listener listener) {
  state_->reading_callbacks.remove(listener);
  state_->event_callbacks.remove(listener);
  state_->capture_callbacks.remove(listener);
  state_->instrument_callbacks.remove(listener);
}

void Bench::begin_run(RunOnBench run) {
  state_->run = run;
  state_->step = -1;
  state_->accept_since_ns.reset();
  state_->captures.clear();
  state_->digests.clear();
}

void Bench::end_run() {
  state_->run = {};
  state_->step = -1;
}

void Bench::set_step(std::int32_t step) {
  state_->step = step;
  state_->accept_since_ns.reset();
}

void Bench::accept_captures(std::optional<std::int64_t> since_ns) {
  state_->accept_since_ns = since_ns;
}

void Bench::event(std::string kind, std::string source, std::string text, std::optional<store::RunId> run) {
  state_->tell(state_->clock.now_ns(), std::move(kind), std::move(source), std::move(text), run);
}

void Bench::show_typed(std::size_t channel, const Point& raw_point) {
  instrument::Reading reading;
  reading.value = raw_point.raw;
  reading.flags = raw_point.flags;
  const auto& declared = state_->hookup.channels.at(channel);
  const auto converted = evaluation::convert(declared, reading, state_->cold_junction(declared));
  auto point = raw_point;
  point.value = converted ? *converted : std::nan("");
  state_->take_point(channel, point);
}

void Bench::take_capture(std::string instrument, std::string file_name, std::string bytes,
                         std::int32_t step) {
  state_->take_capture(std::move(instrument), std::move(file_name), std::move(bytes), step,
                       state_->clock.now_ns());
}

namespace {

Refusal no_such(const std::string& control) {
  return {control, "no such control is declared, or its instrument cannot be commanded"};
}

}  // namespace

awaitable<Outcome<std::optional<double>>> Bench::apply(std::string control, std::string setting,
                                                       double value) {
  auto* instrument = state_->instrument_of(control);
  if (instrument == nullptr) co_return no_such(control);
  const auto outcome = co_await instrument->apply(std::move(setting), value);
  const bool done =
      outcome.state == instrument::CommandState::confirmed || outcome.state == instrument::CommandState::sent;
  if (!done) co_return Refusal{control, outcome.text};
  co_return outcome.read_back;
}

awaitable<Outcome<void>> Bench::switch_on(std::string control) {
  auto* instrument = state_->instrument_of(control);
  if (instrument == nullptr) co_return no_such(control);
  const auto outcome = co_await instrument->switch_on();
  const bool done =
      outcome.state == instrument::CommandState::confirmed || outcome.state == instrument::CommandState::sent;
  if (!done) co_return Refusal{control, outcome.text};
  co_return Outcome<void>{};
}

awaitable<Outcome<SafeHow>> Bench::make_safe(std::string control) {
  auto* instrument = state_->instrument_of(control);
  if (instrument == nullptr) co_return no_such(control);
  const auto outcome = co_await instrument->make_safe();
  if (outcome.state == instrument::CommandState::confirmed) co_return SafeHow::confirmed;
  if (outcome.state == instrument::CommandState::sent) co_return SafeHow::sent;
  co_return Refusal{control, outcome.text};
}

bool Bench::may_command(std::string_view control) const {
  const auto* instrument = state_->instrument_of(control);
  return instrument != nullptr && (instrument->state() == instrument::State::ready ||
                                   instrument->state() == instrument::State::resynchronising);
}

}  // namespace loadstair::recorder
