// What comes in: readings, the instruments' events, a scope's files, the clock's steps.
#include <boost/asio/post.hpp>
#include <cmath>
#include <cstdlib>
#include <exception>
#include <utility>

#include "analysis/base/number.h"
#include "daemon/evaluation/live.h"
#include "daemon/recorder/bench_state.h"
#include "drivers/link/notice.h"
#include "drivers/scope_csv/scope_csv.h"

namespace loadstair::recorder {
namespace {

using boost::asio::awaitable;

constexpr std::chrono::milliseconds kClockLook{200};
constexpr std::int64_t kClockStep = 500'000'000;

/// Two independent 64-bit sums: the same bytes twice, not a forger, are to be found.
std::pair<std::uint64_t, std::uint64_t> digest_of(std::string_view bytes) {
  std::uint64_t sum = 14695981039346656037ULL;  // FNV-1a
  for (const char c : bytes) sum = (sum ^ static_cast<unsigned char>(c)) * 1099511628211ULL;
  return {sum, std::hash<std::string_view>{}(bytes) ^ bytes.size()};
}

}  // namespace

std::optional<double> Bench::State::cold_junction(const setup::Channel& channel) const {
  const auto& sensor = channel.conversion.thermocouple;
  if (!sensor || sensor->cold_junction.empty()) return std::nullopt;
  for (std::size_t place = 0; place < hookup.channels.size(); ++place) {
    if (hookup.channels[place].name != sensor->cold_junction || windows[place].empty()) continue;
    const auto last = windows[place].back();
    if (std::isfinite(last.value)) return last.value;
  }
  return std::nullopt;
}

void Bench::State::take_point(std::size_t channel, Point point) {
  windows[channel].push(point);
  if (std::isfinite(point.value)) last_usable[channel] = point;
  reading_callbacks.call(ChannelUpdate{channel, point});
}

void Bench::State::take_exchange(const Owned& one, const instrument::Exchange& exchange) {
  const auto now = clock.now_ns();
  store::ReplyItem item;
  item.run = run.run;
  item.instrument = hookup.instruments[one.place].name;
  item.exchange = exchange;
  for (const auto& reading : exchange.readings) {
    const auto value = static_cast<std::size_t>(reading.value_index);
    static const std::vector<std::int32_t> nobody;
    const auto& users = value < one.channels_of.size() ? one.channels_of[value] : nobody;
    item.channels.push_back(users.empty() ? -1 : users.front());
  }
  // A value that two channels use counts for both.
  for (const auto& reading : exchange.readings) {
    const auto value = static_cast<std::size_t>(reading.value_index);
    if (value >= one.channels_of.size()) continue;
    for (std::size_t more = 1; more < one.channels_of[value].size(); ++more) {
      item.exchange.readings.push_back(reading);
      item.channels.push_back(one.channels_of[value][more]);
    }
  }
  // Before the listeners hear of it: a guard that stops the run must not come before its own reading.
  const auto readings = item.exchange.readings;
  const auto channels = item.channels;
  if (run.run != 0) writer.post(std::move(item));
  for (std::size_t i = 0; i < readings.size(); ++i) {
    if (channels[i] < 0) continue;
    const auto channel = static_cast<std::size_t>(channels[i]);
    const auto& declared = hookup.channels[channel];
    const auto converted = evaluation::convert(declared, readings[i], cold_junction(declared));
    Point point;
    point.t_ns = readings[i].t_ns;
    point.half_width_ns = readings[i].half_width_ns;
    point.arrived_ns = now;
    point.value = converted ? *converted : std::nan("");
    point.raw = readings[i].value;
    point.flags = readings[i].flags;
    take_point(channel, point);
  }
}

void Bench::State::take_event(const Owned& one, const instrument::Event& event) {
  tell(event.t_ns, std::string{instrument::name_of(event.kind)}, hookup.instruments[one.place].name,
       event.text, std::nullopt);
  instrument_callbacks.call();
}

void Bench::State::post_event(store::EventItem item) {
  BenchEvent shown{item.t_ns, item.kind, item.source, item.text};
  writer.post(std::move(item));
  events.push_back(shown);
  while (events.size() > options.events_kept) events.pop_front();
  event_callbacks.call(shown);
}

void Bench::State::tell(std::int64_t t_ns, std::string kind, std::string source, std::string text,
                        std::optional<store::RunId> for_run) {
  store::EventItem item;
  item.run = for_run.value_or(run.run);
  item.t_ns = t_ns;
  item.kind = std::move(kind);
  item.source = std::move(source);
  item.text = std::move(text);
  post_event(std::move(item));
}

/// The monotonic clock stands still while the machine is suspended and ignores whoever sets the wall clock:
/// either shows as a jump of their difference. Slow corrections add up until they are worth an event too.
awaitable<void> Bench::State::watch_clock() {
  const auto self = shared_from_this();
  auto known = clock.utc_offset_ns();
  while (!closed) {
    co_await clock.sleep_for(kClockLook);
    const auto offset = clock.utc_offset_ns();
    if (std::abs(offset - known) <= kClockStep) continue;
    store::EventItem item;
    item.run = run.run;
    item.t_ns = clock.now_ns();
    item.kind = "clock step";
    item.source = "clock";
    item.text =
        "the wall clock moved by " + base::print_fixed(static_cast<double>(offset - known) * 1e-9, 3) +
        " s against the monotonic one (set by hand or by a time server, or the machine was suspended); a run "
        "keeps the offset it began with";
    item.utc_offset_before_ns = known;
    item.utc_offset_after_ns = offset;
    post_event(std::move(item));
    known = offset;
  }
}

void Bench::State::in_background(std::function<void()> job, std::function<void()> done) {
  const auto guarded = [weak = weak_from_this(), executor_of = executor, job = std::move(job),
                        done = std::move(done)](bool in_place) {
    std::string failure;
    try {
      job();
    } catch (const std::exception& error) {
      failure = error.what();
    } catch (...) {
      failure = "an exception of an unknown kind";
    }
    const auto after = [weak, failure, done] {
      if (const auto self = weak.lock(); self && !failure.empty()) {
        self->tell(self->clock.now_ns(), "broken", "background", failure, std::nullopt);
      }
      if (done) done();
    };
    if (in_place) {
      after();
    } else {
      boost::asio::post(executor_of, after);
    }
  };
  if (!options.background) {
    guarded(true);
    return;
  }
  options.background([guarded] { guarded(false); });
}

awaitable<void> Bench::State::watch_folder(std::size_t place) {
  const auto self = shared_from_this();
  struct Look {
    FolderLook found;
    bool finished = false;
  };
  const auto name = hookup.instruments[place].name;
  while (!closed) {
    const auto look = std::make_shared<Look>();
    const auto notice = std::make_shared<link::Notice>(clock, executor);
    in_background([look, watch = owned[place]->folder] { look->found = watch->look(); },
                  [look, notice] {
                    look->finished = true;
                    notice->notify();
                  });
    while (!look->finished) co_await notice->wait_until(INT64_MAX);
    for (auto& text : look->found.events) tell(clock.now_ns(), "capture refused", name, text, std::nullopt);
    for (auto& file : look->found.files) {
      take_capture(name, file.name, std::move(file.bytes), -1, clock.now_ns() - file.age_ns);
    }
    co_await clock.sleep_for(std::chrono::nanoseconds{options.folder_look_ns});
  }
}

/// Why a capture cannot be said to show the running step; empty: it does.
std::string Bench::State::why_unbound(std::int64_t saved_ns) const {
  if (step < 0) return "came while no step was running";
  if (!accept_since_ns) return "came before the step's averaging had begun";
  if (saved_ns >= *accept_since_ns) return {};
  return "was saved " + base::print_fixed(static_cast<double>(*accept_since_ns - saved_ns) * 1e-9, 1) +
         " s before the step's set points were there";
}

/// A file shows the bench as it was when it was saved: a late one belongs to an earlier step, and nobody
/// knows to which.
void Bench::State::take_capture(std::string instrument, std::string file_name, std::string bytes,
                                std::int32_t for_step, std::int64_t saved_ns) {
  struct Work {
    store::CaptureItem item;
    std::pair<std::uint64_t, std::uint64_t> digest;
    std::size_t samples = 0, channels = 0;
    std::string refused, unbound;
  };
  const auto work = std::make_shared<Work>();
  work->item.run = run.run;
  if (for_step < 0) work->unbound = why_unbound(saved_ns);
  work->item.step = for_step >= 0 ? for_step : work->unbound.empty() ? step : -1;
  work->item.file_name = std::move(file_name);
  work->item.instrument = std::move(instrument);
  work->item.t_ns = clock.now_ns();
  work->item.bytes = std::make_shared<const std::string>(std::move(bytes));
  in_background(
      [work] {
        work->digest = digest_of(*work->item.bytes);
        const auto read = scope_csv::read_scope_csv(*work->item.bytes, work->item.file_name);
        if (!read) {
          work->refused = read.refusal().text();
          return;
        }
        work->channels = read->samples.columns.size();
        work->samples = work->channels == 0 ? 0 : read->samples.columns.front().values.size();
      },
      [self = shared_from_this(), work] {
        auto& item = work->item;
        if (!work->refused.empty()) {
          self->tell(self->clock.now_ns(), "capture refused", item.instrument, work->refused, std::nullopt);
          return;
        }
        if (item.run == 0 || item.run != self->run.run) {
          self->tell(self->clock.now_ns(), "capture left out", item.instrument,
                     item.file_name + " came while no run was going on", std::nullopt);
          return;
        }
        if (!self->digests.insert(work->digest).second) return;  // the same file again
        if (!work->unbound.empty()) {
          self->tell(self->clock.now_ns(), "capture of no step", item.instrument,
                     item.file_name + " " + work->unbound + ", so it is kept and used for no step",
                     std::nullopt);
        }
        const CaptureArrived arrived{item.instrument, item.file_name, item.step, work->samples,
                                     work->channels};
        self->writer.post(std::move(item));
        ++self->captures[arrived.step];
        self->capture_callbacks.call(arrived);
      });
}

}  // namespace loadstair::recorder
