#include <algorithm>
#include <boost/asio/use_awaitable.hpp>
#include <cmath>

#include "analysis/base/number.h"
#include "drivers/rehearsal/bench_core.h"

namespace loadstair::rehearsal {

namespace {

namespace net = boost::asio;
using Kind = ScpiAction::Kind;
constexpr std::string_view kSomebodyElse = "somebody else,0,0,0";

std::chrono::nanoseconds nanoseconds(double length_s) {
  return std::chrono::nanoseconds{std::llround(length_s * 1e9)};
}

/// As many places as the last digit asks for, and never fewer than a bench meter prints.
std::string scientific(const Shown& shown) {
  int decimals = 5;
  if (shown.digit > 0.0) {
    const double largest = std::max(std::abs(shown.value), shown.digit);
    const double places = std::floor(std::log10(largest) + 1e-9) - std::floor(std::log10(shown.digit) + 1e-9);
    decimals = std::clamp(static_cast<int>(places), 5, 15);
  }
  return base::print_scientific(shown.value, decimals);
}

std::string measured(BenchCore& core, const Station& station, const ScpiQuery& query, const Fault* fault) {
  const std::vector<Shown> shown = core.simulator.read(station.index, core.now_s());
  const Meter& meter = core.simulator.meter(station.index);
  std::string reply;
  for (const std::string& name : query.functions) {
    if (!reply.empty()) reply += ',';
    const auto function = meter.find(name);
    if (!function) {
      reply += base::print_scientific(0.0, 5);
      continue;
    }
    Shown value = shown[*function];
    if (fault != nullptr && fault->kind == FaultKind::overload) value.overload = true;
    // Somebody chose the range with the next smaller prefix: the number is a thousand times larger.
    if (fault != nullptr && fault->kind == FaultKind::unit_change)
      value = {1e3 * value.value, 0.0, 0.0, value.overload};
    reply += value.overload ? station.description.overload_reply : scientific(value);
  }
  return reply;
}

std::string position_text(const BenchCore& core, const Station& station, std::size_t index) {
  const Knob knob = station.description.settings[index].knob;
  if (knob == Knob::none) return base::print_scientific(station.own_settings[index], 5);
  const double value = core.simulator.position(knob);
  const bool whole = is_switch(knob) || knob == Knob::lamps || knob == Knob::resistors;
  return whole ? base::print_integer(std::llround(value)) : base::print_scientific(value, 5);
}

void turn(BenchCore& core, Station& station, const ScpiAction& action) {
  const Knob knob = station.description.settings[action.index].knob;
  if (knob == Knob::none) {
    station.own_settings[action.index] = action.value;
  } else if (!core.simulator.turn(knob, action.value, core.now_s())) {
    station.device.add_error(-222, "Data out of range");
  }
}

void reset(BenchCore& core, const Station& station) {
  for (const ScpiSetting& s : station.description.settings) {
    if (!is_switch(s.knob)) continue;
    [[maybe_unused]] const base::Outcome<void> off = core.simulator.turn(s.knob, 0.0, core.now_s());
  }
}

/// Does one unit of a message. Its reply, nullopt when it has none.
net::awaitable<std::optional<std::string>> act(CorePtr core, Station& station, std::string unit,
                                               const Fault* fault, bool wrong_identity) {
  const ScpiAction action = station.device.understand(unit);
  switch (action.kind) {
    case Kind::nothing:
      break;
    case Kind::text:
      co_return action.text;
    case Kind::identity:
      co_return wrong_identity ? std::string{kSomebodyElse} : station.description.identity;
    case Kind::measure: {
      const MeterDescription& meter = station.description.meter;
      if (meter.update_period_s <= 0.0)
        co_await core->clock.sleep_for(nanoseconds(meter.integration_s + meter.delay_s));
      co_return measured(*core, station, station.description.queries[action.index], fault);
    }
    case Kind::turn:
      turn(*core, station, action);
      break;
    case Kind::position:
      co_return position_text(*core, station, action.index);
    case Kind::trigger:
      ++station.captures_pending;
      core->tasks.spawn([](CorePtr owner, Station& scope) -> link::Wait {
        [[maybe_unused]] const base::Outcome<std::string> dropped = co_await capture(owner, scope);
        --scope.captures_pending;
      }(core, station));
      break;
    case Kind::complete:
      while (station.captures_pending > 0) co_await core->clock.sleep_for(std::chrono::milliseconds{5});
      co_return "1";
    case Kind::function:
      co_return fault != nullptr && fault->kind == FaultKind::unit_change
          ? station.description.turned_reply
          : station.description.function_reply;
    case Kind::reset:
      reset(*core, station);
      break;
  }
  co_return std::nullopt;
}

/// A reply as the fault leaves it; empty and not sent when it swallows it.
struct Altered {
  std::string bytes;
  bool sent = true;
  bool twice = false;
  double delay_s = 0.0;
};

Altered altered(const BenchCore& core, const Station& station, std::string reply, const Fault* fault) {
  Altered out{std::move(reply)};
  if (fault == nullptr) return out;
  switch (fault->kind) {
    case FaultKind::silence:
      out.sent = false;
      break;
    case FaultKind::late:
      out.delay_s = fault->delay_s;
      break;
    case FaultKind::garbage:
      out.bytes = garbage(core, station, std::max<std::size_t>(out.bytes.size(), 4));
      break;
    case FaultKind::truncated:
      out.bytes.resize(out.bytes.size() / 2);
      break;
    case FaultKind::duplicate:
      out.twice = true;
      break;
    case FaultKind::stale:
      out.bytes = station.last_reply;
      break;
    case FaultKind::overload:
    case FaultKind::unit_change:
    case FaultKind::wrong_identity:
    case FaultKind::vanish:
      break;
  }
  return out;
}

net::awaitable<void> answer(CorePtr core, Station& station, std::shared_ptr<link::Link> link,
                            std::string message) {
  const std::vector<std::string> units = units_of(message);
  if (units.empty()) co_return;
  const bool asks = std::any_of(units.begin(), units.end(), is_query);
  const std::int64_t number = asks ? ++station.queries : ++station.commands;
  const double now_s = core->now_s();
  if (asks) {
    const Fault* gone = station.plan.covering(FaultKind::vanish, now_s, number);
    if (gone != nullptr && gone->at_query) {
      vanish(core, station, gone->length_s);
      co_return;
    }
  }
  // Copies: the plan may grow while this waits.
  std::optional<Fault> fault;
  if (const Fault* found = asks ? station.plan.altering(now_s, number) : nullptr) fault = *found;
  const bool wrong = station.plan.covering(FaultKind::wrong_identity, now_s, number) != nullptr;
  std::string reply;
  bool has_reply = false;
  bool wrong_identity = false;
  for (const std::string& unit : units) {
    const auto* altering = fault ? &*fault : nullptr;
    std::optional<std::string> part = co_await act(core, station, unit, altering, wrong);
    if (!part) continue;
    wrong_identity = wrong_identity || *part == kSomebodyElse;
    reply += (has_reply ? ";" : "") + *part;
    has_reply = true;
  }
  if (!has_reply) {
    core->note(station, "set", number, "", message, "");
    co_return;
  }
  co_await core->clock.sleep_for(nanoseconds(station.description.reply_delay_s));
  const Altered out = altered(*core, station, reply, fault ? &*fault : nullptr);
  if (out.delay_s > 0.0) co_await core->clock.sleep_for(nanoseconds(out.delay_s));
  std::string name = fault ? std::string{name_of(fault->kind)} : wrong_identity ? "wrong_identity" : "";
  if (!out.sent) {
    core->note(station, "fault", number, name, message, "");
    co_return;
  }
  for (int times = 0; times < (out.twice ? 2 : 1); ++times) {
    core->note(station, "reply", number, name, message, out.bytes);
    [[maybe_unused]] const bool sent =
        co_await send(core, station, link, out.bytes + station.description.terminator);
  }
  // A stale reply that is followed by another is what that one repeats: a display on hold.
  if (!fault || fault->kind != FaultKind::stale) station.last_reply = reply;
}

}  // namespace

link::Wait converse(CorePtr core, Station& station, std::shared_ptr<link::Link> link) {
  const bool talks = station.description.service == Service::scpi;
  const bool pty = station.description.link == LinkKind::pty;
  const std::string terminator = station.description.terminator;
  while (true) {
    link::Received received = co_await link->read_line(terminator, INT64_MAX);
    if (received.status == link::Status::closed) break;
    if (received.status != link::Status::done || !talks) continue;
    if (pty) {
      if (station.pty.slave >= 0 && rate_differs(station.pty.slave, station.description.baud))
        received.bytes = garbage(*core, station, received.bytes.size());
      // The message comes in one piece from a pty; on a wire it would have taken its time.
      const double wire_s = 10.0 * static_cast<double>(received.bytes.size() + 1) / station.description.baud;
      co_await core->clock.sleep_for(nanoseconds(wire_s));
    }
    co_await answer(core, station, link, std::move(received.bytes));
  }
  link->close();
  std::erase(station.links, link);
}

}  // namespace loadstair::rehearsal
