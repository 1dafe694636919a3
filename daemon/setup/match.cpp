#include "analysis/base/number.h"
#include "daemon/setup/hookup_parts.h"
#include "daemon/setup/reading.h"
#include "daemon/setup/stair.h"

namespace loadstair::setup {
namespace {

using document::print_text;

// Finds the places in the stair's own text, which was read before; a stair made by a program has none.
class Places {
 public:
  explicit Places(const Stair& stair) : stair_{stair} {
    if (auto read = document::parse(stair.text, stair.file)) document_ = *std::move(read);
  }

  // The first of these paths that is there; the file otherwise.
  [[nodiscard]] std::string of(std::initializer_list<std::string> paths) const {
    for (const std::string& path : paths) {
      const auto* value = document_ ? document::find(*document_, path) : nullptr;
      if (value != nullptr) return document::print_place(stair_.file, value->place);
    }
    return stair_.file;
  }

 private:
  const Stair& stair_;
  std::optional<document::Value> document_;
};

std::string index_text(std::size_t index) {
  return base::print_integer(static_cast<std::int64_t>(index));
}

// Of a voltage or a current; a wattmeter sees both.
bool sees_dc(const Channel& channel) {
  return channel.response != Response::true_rms_ac && channel.response != Response::average_responding;
}
bool sees_ac(const Channel& channel) {
  return channel.response != Response::dc;
}

struct Matcher {
  const Stair& stair;
  const Hookup& hookup;
  Places places;
  std::optional<base::Refusal> refusal;

  void refuse(std::string place, std::string reason) {
    if (!refusal) refusal = base::Refusal{std::move(place), std::move(reason)};
  }

  const Channel* channel(const std::string& name, const std::string& path) {
    const Channel* found = hookup.find_channel(name);
    if (found == nullptr) {
      const auto known = names_of(hookup.channels);
      refuse(places.of({path}),
             "the hook-up has no channel " + print_text(name) + document::suggest(name, known));
    }
    return found;
  }

  // One that a machine reads again and again.
  const Channel* polled_channel(const std::string& name, const std::string& path, std::string_view use) {
    const Channel* found = channel(name, path);
    if (found != nullptr && found->typed) {
      refuse(places.of({path}), "the channel " + print_text(name) + " is typed at the end of a step, so " +
                                    std::string{use} + "; name a channel of an instrument");
    }
    return found;
  }

  void set_point(const Step& step, const SetPoint& point, std::size_t index) {
    const std::string at = step.written_at + "/set/" + index_text(index);
    const bool input = step.written_at == "staircase" && step.input_voltage_v && index == 0;
    const std::string control_key = input ? "/input_control" : "/control";
    const std::string control_place = places.of({at + "/control", step.written_at + control_key});
    const auto controls = names_of(hookup.controls);
    const auto control = std::find_if(hookup.controls.begin(), hookup.controls.end(),
                                      [&](const Control& one) { return one.name == point.control; });
    if (control == hookup.controls.end()) {
      refuse(control_place, "the hook-up has no control " + print_text(point.control) +
                                document::suggest(point.control, controls));
      return;
    }
    const Instrument* instrument = hookup.find_instrument(control->instrument);
    if (instrument == nullptr) return;
    const auto settings = names_of(instrument->profile.settings);
    if (contains(settings, point.setting)) return;
    const std::string setting_place =
        input ? control_place : places.of({at + "/setting", step.written_at + "/setting", at});
    refuse(setting_place, "the control " + print_text(point.control) + " has no setting " +
                              print_text(point.setting) + document::suggest(point.setting, settings));
  }

  void settle(const Step& step) {
    const std::string at = step.written_at + "/settle/";
    if (step.electrical) {
      polled_channel(step.electrical->channel, at + "electrical/channel",
                     "it cannot show when the step is steady");
    }
    if (!step.thermal) return;
    const std::string path = at + "thermal/channel";
    const Channel* found =
        polled_channel(step.thermal->channel, path, "it cannot show when the step is steady");
    if (found != nullptr && found->quantity != Quantity::temperature) {
      refuse(places.of({path}), "the channel " + print_text(found->name) + " is a " +
                                    std::string{name_of(found->quantity)} +
                                    "; a thermal criterion takes a temperature");
    }
  }

  void check_step(const Step& step) {
    for (std::size_t i = 0; i < step.set.size(); ++i) set_point(step, step.set[i], i);
    check_on(step);
    settle(step);
    if (step.capture && hookup.captures.empty()) {
      refuse(
          places.of({step.written_at + "/capture"}),
          "this wants a capture, but the hook-up has no \"captures\"; add the scope there, or write false");
    }
  }

  void check_on(const Step& step) {
    const std::string at =
        (step.kind == StepKind::tie ? "checks/ties/" + index_text(step.check) : step.written_at) + "/on/";
    const auto controls = names_of(hookup.controls);
    for (std::size_t i = 0; i < step.on.size(); ++i) {
      if (contains(controls, step.on[i])) continue;
      refuse(places.of({at + index_text(i)}), "the hook-up has no control " + print_text(step.on[i]) +
                                                  document::suggest(step.on[i], controls));
    }
  }

  // With its input shorted a meter that is coupled by a capacitor shows its noise, and a thermometer nothing.
  void check_zeros() {
    for (std::size_t i = 0; i < stair.zero_channels.size(); ++i) {
      const std::string path = "checks/zero/channels/" + index_text(i);
      const Channel* found = channel(stair.zero_channels[i], path);
      if (found == nullptr) return;
      const bool electrical = found->quantity == Quantity::voltage || found->quantity == Quantity::current ||
                              found->quantity == Quantity::power;
      if (!electrical) {
        refuse(places.of({path}), "the channel " + print_text(found->name) + " is a " +
                                      std::string{name_of(found->quantity)} +
                                      "; voltages, currents and powers have a zero to measure; remove it");
      }
      if (!sees_dc(*found)) {
        refuse(places.of({path}), "the channel " + print_text(found->name) + " has the response " +
                                      std::string{name_of(found->response)} +
                                      ", which does not see DC, so it has no zero to take off; remove it");
      }
    }
  }

  void check_tie(const Tie& tie, const std::string& at) {
    const Channel* first = channel(tie.channels.front(), at + "0");
    for (std::size_t i = 1; i < tie.channels.size() && !refusal; ++i) {
      const std::string path = at + index_text(i);
      const Channel* other = channel(tie.channels[i], path);
      if (other == nullptr) return;
      const std::string both = "the channels " + print_text(first->name) + " and " + print_text(other->name);
      if (other->quantity != first->quantity || other->unit != first->unit) {
        refuse(places.of({path}), both + " are a " + std::string{name_of(first->quantity)} + " and a " +
                                      std::string{name_of(other->quantity)} +
                                      "; a tie compares meters on one quantity");
      }
      if (sees_dc(*first) != sees_dc(*other) && !(sees_ac(*first) && sees_ac(*other))) {
        refuse(places.of({path}), both + " have the responses " + std::string{name_of(first->response)} +
                                      " and " + std::string{name_of(other->response)} +
                                      ", which see nothing in common; tie meters of one response");
      }
      if (!first->meter.empty() && first->meter == other->meter) {
        refuse(places.of({path}), both + " are read from one meter, " + print_text(first->meter) +
                                      ", which always agrees with itself; tie two meters");
      }
    }
  }

  void check_ties() {
    for (std::size_t i = 0; i < stair.ties.size() && !refusal; ++i) {
      check_tie(stair.ties[i], "checks/ties/" + index_text(i) + "/channels/");
    }
  }

  void check_limits() {
    std::vector<std::string_view> known;
    for (const TemperaturePoint& point : hookup.temperatures) known.push_back(point.place);
    for (std::size_t i = 0; i < stair.limits.size(); ++i) {
      const std::string& quantity = stair.limits[i].quantity;
      const std::size_t blank = quantity.find(' ');
      if (blank == std::string::npos || contains(known, quantity.substr(blank + 1))) continue;
      const std::string place = quantity.substr(blank + 1);
      refuse(
          places.of({"limits/" + index_text(i) + "/quantity"}),
          "the hook-up has no temperature at a place " + print_text(place) + document::suggest(place, known));
    }
  }

  void check_guards() {
    for (std::size_t i = 0; i < stair.guards.size(); ++i) {
      polled_channel(stair.guards[i].channel, "guards/" + index_text(i) + "/channel", "it cannot be guarded");
    }
  }

  // An inverter's ratings on a DC-DC bench: the wrong pair of files.
  void check_kind() {
    if (hookup.ports.empty()) return;
    const bool ac_output = std::any_of(hookup.ports.begin(), hookup.ports.end(), [](const Port& port) {
      return port.direction == Direction::output && port.kind == PortKind::ac;
    });
    if (ac_output == (stair.ratings.output_frequency_hz > 0.0)) return;
    refuse(
        places.of({"ratings/output_frequency_hz", "ratings"}),
        ac_output
            ? "the hook-up has an AC output, but the ratings name no \"output_frequency_hz\"; add it, for "
              "example 50"
            : "the ratings name an output frequency, but the hook-up has no AC output; are these two files "
              "for the same bench?");
  }
};

}  // namespace

base::Outcome<void> match(const Stair& stair, const Hookup& hookup) {
  Matcher matcher{stair, hookup, Places{stair}, std::nullopt};
  matcher.check_kind();
  for (const Step& step : stair.steps) {
    matcher.check_step(step);
    if (matcher.refusal) break;
  }
  matcher.check_zeros();
  matcher.check_ties();
  matcher.check_limits();
  matcher.check_guards();
  if (matcher.refusal) return *matcher.refusal;
  return {};
}

}  // namespace loadstair::setup
