// What a person's hands do at the rehearsed bench: turn knobs, change the wiring.
#include "analysis/base/number.h"
#include "drivers/rehearsal/bench_core.h"

namespace loadstair::rehearsal {

namespace {

/// Parts between separators, without the blanks around them; empty parts are left out.
std::vector<std::string> parts_of(const std::string& text, char separator) {
  std::vector<std::string> parts;
  std::size_t from = 0;
  while (from <= text.size()) {
    const std::size_t to = std::min(text.find(separator, from), text.size());
    const std::size_t first = text.find_first_not_of(' ', from);
    if (first < to) {
      const std::size_t last = text.find_last_not_of(' ', to - 1);
      parts.push_back(text.substr(first, last + 1 - first));
    }
    from = to + 1;
  }
  return parts;
}

base::Outcome<Simulator::Circuit> circuit_named(BenchCore& core, const std::string& channel) {
  const auto found = [&core](const std::string& instrument,
                             const std::string& function) -> base::Outcome<Simulator::Circuit> {
    const Station* station = core.find(instrument);
    if (station == nullptr) return base::Refusal{instrument, "this bench has no such instrument"};
    const auto place = core.simulator.meter(station->index).find(function);
    if (!place) return base::Refusal{instrument, "it has no function \"" + function + "\""};
    return Simulator::Circuit{station->index, *place};
  };
  for (const TypedChannel& typed : core.description.typed)
    if (typed.channel == channel) return found(typed.instrument, typed.function);
  for (const NamedCircuit& named : core.description.circuits)
    if (named.channel == channel) return found(named.instrument, named.function);
  return base::Refusal{"channel \"" + channel + "\"", "nobody at this bench knows that channel"};
}

void short_all_inputs(BenchCore& core) {
  for (const auto& station : core.stations) {
    const auto& functions = core.simulator.meter(station->index).description().functions;
    for (std::size_t f = 0; f < functions.size(); ++f) {
      const Quantity quantity = functions[f].quantity;
      if (quantity == Quantity::voltage || quantity == Quantity::current || quantity == Quantity::power)
        core.simulator.short_circuit({station->index, f}, core.now_s());
    }
  }
}

base::Outcome<void> short_named(BenchCore& core, const std::string& names) {
  if (names == "inputs") {
    short_all_inputs(core);
    return {};
  }
  for (const std::string& name : parts_of(names, ',')) {
    const auto circuit = circuit_named(core, name);
    if (!circuit) return circuit.refusal();
    core.simulator.short_circuit(*circuit, core.now_s());
  }
  return {};
}

base::Outcome<void> tie_named(BenchCore& core, const std::string& names) {
  std::optional<Simulator::Circuit> first;
  for (const std::string& name : parts_of(names, ',')) {
    const auto circuit = circuit_named(core, name);
    if (!circuit) return circuit.refusal();
    if (!first) {
      first = *circuit;
      continue;
    }
    if (auto tied = core.simulator.tie(*first, *circuit, core.now_s()); !tied) return tied.refusal();
  }
  return {};
}

base::Outcome<void> turn_named(BenchCore& core, const std::string& action) {
  const std::size_t blank = action.rfind(' ');
  const auto knob = blank == std::string::npos ? std::nullopt : knob_named(action.substr(0, blank));
  const auto value = blank == std::string::npos ? std::nullopt : base::parse_number(action.substr(blank + 1));
  if (!knob || !value) {
    return base::Refusal{
        "\"" + action + "\"",
        "a knob and a number are wanted, such as \"lamps 3\", or short, tie and channels, or "
        "restore"};
  }
  return core.simulator.turn(*knob, *value, core.now_s());
}

base::Outcome<void> do_one(BenchCore& core, const std::string& action) {
  if (action.starts_with("short ")) return short_named(core, action.substr(6));
  if (action.starts_with("tie ")) return tie_named(core, action.substr(4));
  if (action != "restore") return turn_named(core, action);
  core.simulator.restore_wiring(core.now_s());
  return {};
}

}  // namespace

base::Outcome<void> BenchCore::perform(const std::string& actions) {
  const auto all = parts_of(actions, ';');
  if (all.empty()) return turn_named(*this, actions);
  for (const std::string& action : all) {
    if (auto done = do_one(*this, action); !done) return done.refusal();
    const std::int64_t now = clock.now_ns();
    log.add({now, now + clock.utc_offset_ns(), "", "hand", 0, "", action, ""});
  }
  return {};
}

}  // namespace loadstair::rehearsal
