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
    const std::string at = step.written_at + "/set/" + base::print_integer(static_cast<std::int64_t>(index));
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
    settle(step);
    if (step.capture && hookup.captures.empty()) {
      refuse(
          places.of({step.written_at + "/capture"}),
          "this wants a capture, but the hook-up has no \"captures\"; add the scope there, or write false");
    }
  }

  void check_guards() {
    for (std::size_t i = 0; i < stair.guards.size(); ++i) {
      polled_channel(stair.guards[i].channel,
                     "guards/" + base::print_integer(static_cast<std::int64_t>(i)) + "/channel",
                     "it cannot be guarded");
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
  matcher.check_guards();
  if (matcher.refusal) return *matcher.refusal;
  return {};
}

}  // namespace loadstair::setup
