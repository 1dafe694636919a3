#include <algorithm>
#include <cmath>

#include "analysis/base/number.h"
#include "drivers/rehearsal/bench_core.h"

namespace loadstair::rehearsal {

namespace {

constexpr double kDefaultPeriod_s = 0.5;

std::string field_text(const LineField& field, const Shown& shown, const Fault* fault,
                       const std::string& overload) {
  const bool turned = fault != nullptr && fault->kind == FaultKind::unit_change;
  const double scale = turned ? field.turned_scale : field.scale;
  const std::string& after = turned ? field.turned_after : field.after;
  if (shown.overload || (fault != nullptr && fault->kind == FaultKind::overload))
    return field.before + overload + after;
  return field.before + base::print_fixed(shown.value / scale, decimals_of(shown.digit / scale)) + after;
}

/// One line with its fault, on every link that is open (one, save on TCP).
link::Wait print_line(CorePtr core, Station& station, std::string text, std::optional<Fault> fault) {
  const std::string name = fault ? std::string{name_of(fault->kind)} : "";
  const FaultKind kind = fault ? fault->kind : FaultKind::overload;
  std::string bytes = text;
  if (fault && kind == FaultKind::silence) {
    core->note(station, "fault", station.lines, name, "", "");
    co_return;
  }
  if (fault && kind == FaultKind::late)
    co_await core->clock.sleep_for(std::chrono::nanoseconds{std::llround(fault->delay_s * 1e9)});
  if (fault && kind == FaultKind::garbage)
    bytes = garbage(*core, station, std::max<std::size_t>(text.size(), 4));
  if (fault && kind == FaultKind::truncated) bytes.resize(bytes.size() / 2);
  if (fault && kind == FaultKind::stale) bytes = station.last_reply;
  const std::vector<std::shared_ptr<link::Link>> links = station.links;
  for (int times = 0; times < (fault && kind == FaultKind::duplicate ? 2 : 1); ++times) {
    core->note(station, "line", station.lines, name, "", bytes);
    for (const auto& link : links) {
      [[maybe_unused]] const bool sent =
          co_await send(core, station, link, bytes + station.description.terminator);
    }
  }
  if (!fault || kind != FaultKind::stale) station.last_reply = text;
}

}  // namespace

link::Wait print_lines(CorePtr core, Station& station) {
  const Meter& meter = core->simulator.meter(station.index);
  const double period_s =
      meter.description().update_period_s > 0.0 ? meter.description().update_period_s : kDefaultPeriod_s;
  const bool free_running = meter.description().update_period_s > 0.0;
  double due_s = free_running ? meter.conversion_end_s(0) + meter.description().delay_s : period_s;
  while (!core->closing) {
    co_await core->clock.sleep_until(core->start_ns + std::llround(due_s * 1e9));
    // A conversion that became due while an earlier line was still on the wire is never printed.
    due_s += period_s * std::max(1.0, std::ceil((core->now_s() - due_s) / period_s));
    if (station.links.empty()) continue;
    const std::vector<Shown> shown = core->simulator.read(station.index, core->now_s());
    for (const auto& line : station.description.lines) {
      const std::int64_t number = ++station.lines;
      const double now_s = core->now_s();
      if (const Fault* gone = station.plan.covering(FaultKind::vanish, now_s, number);
          gone != nullptr && gone->at_query) {
        vanish(core, station, gone->length_s);
        break;
      }
      std::optional<Fault> fault;
      if (const Fault* found = station.plan.altering(now_s, number)) fault = *found;
      std::string text;
      for (const LineField& field : line)
        text += field_text(field, shown[meter.find(field.function).value_or(0)], fault ? &*fault : nullptr,
                           station.description.overload_word);
      co_await print_line(core, station, std::move(text), std::move(fault));
    }
  }
}

}  // namespace loadstair::rehearsal
