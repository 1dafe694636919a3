// Is the step settled yet: looked at again and again, off the I/O thread, until a criterion or the limit is
// met.
#include <algorithm>
#include <cmath>
#include <utility>

#include "daemon/sequencer/state.h"

namespace loadstair::sequencer {
namespace {

using boost::asio::awaitable;

constexpr std::int64_t kSettleLook = 250'000'000;

/// The usable readings of a channel from an instant on, in s of that instant.
struct Trace {
  std::vector<double> time_s, value;
  [[nodiscard]] series::TimeSeries view() const { return {time_s, value}; }
};

Trace trace_of(const recorder::Bench& bench, const std::string& channel, std::int64_t from_ns,
               std::int64_t origin_ns) {
  Trace trace;
  const auto place = bench.find_channel(channel);
  if (!place) return trace;
  const auto& window = bench.window(*place);
  const auto times = window.t_ns();
  const auto values = window.value();
  for (std::size_t i = window.first_from(from_ns); i < window.size(); ++i) {
    if (!std::isfinite(values[i])) continue;
    const double t_s = seconds_of(times[i] - origin_ns);
    if (!trace.time_s.empty() && t_s <= trace.time_s.back()) continue;
    trace.time_s.push_back(t_s);
    trace.value.push_back(values[i]);
  }
  return trace;
}

std::string ambient_of(const setup::Hookup& hookup, const std::string& channel) {
  for (const auto& point : hookup.temperatures) {
    if (point.channel == channel) return point.ambient_channel;
  }
  return {};
}

/// The last step under load goes on to the rate criterion; what comes after it may be a check of the bench.
bool nothing_warms_after(const setup::Stair& stair, std::size_t index) {
  return std::none_of(stair.steps.begin() + static_cast<std::ptrdiff_t>(index) + 1, stair.steps.end(),
                      [](const setup::Step& later) {
                        return later.kind == setup::StepKind::level || later.kind == setup::StepKind::closure;
                      });
}

}  // namespace

awaitable<evaluation::WindowState> Sequencer::State::settling_now(const setup::Step& plan) {
  struct Work {
    setup::Step plan;
    Trace electrical, thermal, ambient;
    double floor = 0.0;
    bool last = false;
    evaluation::WindowState found;
    bool finished = false;  ///< set and read on the executor
  };
  const auto work = std::make_shared<Work>();
  work->plan = plan;
  work->last = nothing_warms_after(stair, static_cast<std::size_t>(step_index));
  if (plan.electrical) {
    const auto from = std::max(applied_ns, clock.now_ns() - ticks_of(2.0 * plan.electrical->window_s));
    work->electrical = trace_of(bench, plan.electrical->channel, from, applied_ns);
    if (const auto place = bench.find_channel(plan.electrical->channel)) {
      work->floor = evaluation::electrical_floor(bench.hookup().channels[*place]);
    }
  }
  if (plan.thermal) {
    work->thermal = trace_of(bench, plan.thermal->channel, applied_ns, applied_ns);
    const auto ambient = ambient_of(bench.hookup(), plan.thermal->channel);
    if (!ambient.empty()) work->ambient = trace_of(bench, ambient, applied_ns, applied_ns);
  }
  const auto done = std::make_shared<link::Notice>(clock, bench.executor());
  bench.in_background(
      [work] {
        const evaluation::LiveTraces traces{work->electrical.view(), work->thermal.view(),
                                            work->ambient.view(), work->floor};
        work->found = evaluation::live_window(work->plan, traces, work->last);
      },
      [work, done] {
        work->finished = true;
        done->notify();
      });
  while (!work->finished) co_await done->wait_until(INT64_MAX);
  co_return work->found;
}

awaitable<Go> Sequencer::State::settle(const setup::Step& plan) {
  const auto begin = clock.now_ns();
  step.settle_begin_ns = begin;
  post_step(store::StepState::settling);
  if (!plan.electrical && !plan.thermal) {
    step.settled_how = "no criterion";
    co_return Go::on;
  }
  const auto limit = plan.settle_limit_s > 0.0 ? begin + ticks_of(plan.settle_limit_s) : INT64_MAX;
  enter(StepPhase::settle, "waits until it is settled");
  while (true) {
    const auto found = co_await settling_now(plan);
    const auto now = clock.now_ns();
    if (found.settled) {
      step.settled_how = found.by;
      step.settled_ns = now;
      co_return co_await wait_until(0);
    }
    if (now >= limit) {
      step.settled_how = "not settled";
      event("not settled", stair.steps[static_cast<std::size_t>(step_index)].label,
            "not settled within " + brief(plan.settle_limit_s) + " s: " + found.text);
      co_return co_await wait_until(0);
    }
    auto until = found.remaining_s ? std::optional{now + ticks_of(*found.remaining_s)} : std::nullopt;
    if (limit != INT64_MAX) until = std::min(until.value_or(limit), limit);
    enter(StepPhase::settle, found.text, until);
    if (const auto go = co_await wait_until(std::min(limit, now + kSettleLook)); go != Go::on) co_return go;
  }
}

}  // namespace loadstair::sequencer
