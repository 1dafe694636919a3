// What a person does at the rehearsed bench: read a display, press the scope's button.
#include <cmath>
#include <cstdio>
#include <filesystem>
#include <fstream>

#include "analysis/base/number.h"
#include "drivers/rehearsal/bench_core.h"
#include "drivers/rehearsal/draws.h"

namespace loadstair::rehearsal {

namespace {

namespace net = boost::asio;

std::chrono::nanoseconds nanoseconds(double length_s) {
  return std::chrono::nanoseconds{std::llround(length_s * 1e9)};
}

/// As a person writes it: "600", "0.1".
std::string plain(double value) {
  std::string text = base::print_significant(value, 9);
  if (text.find('.') == std::string::npos || text.find('e') != std::string::npos) return text;
  while (text.back() == '0') text.pop_back();
  if (text.back() == '.') text.pop_back();
  return text;
}

/// The first free number from the station's last one on.
std::string next_path(Station& station) {
  const ScopeDescription& scope = *station.description.scope;
  std::string path;
  std::error_code ignored;
  do {
    std::string number = base::print_integer(++station.captures);
    while (number.size() < 4) number.insert(number.begin(), '0');
    path = scope.folder + "/" + scope.prefix + "_" + number + ".csv";
  } while (std::filesystem::exists(path, ignored));
  return path;
}

/// Whoever watches the folder sees the file whole or not at all.
base::Outcome<void> drop(const std::string& path, const std::string& text) {
  const std::string part = path + ".part";
  {
    std::ofstream out{part, std::ios::binary | std::ios::trunc};
    out << text << std::flush;
    if (!out) return base::Refusal{path, "the capture cannot be written; is the folder there and writable?"};
  }
  if (std::rename(part.c_str(), path.c_str()) == 0) return {};
  return base::Refusal{path, "the capture cannot be moved to its name"};
}

}  // namespace

net::awaitable<base::Outcome<std::string>> capture(CorePtr core, Station& station) {
  const std::string place = "rehearsed instrument \"" + station.description.name + "\"";
  if (!station.description.scope || station.description.scope->folder.empty())
    co_return base::Refusal{place, "it is no scope with a folder to drop captures into"};
  const ScopeDescription& scope = *station.description.scope;
  const double start_s = core->now_s();
  co_await core->clock.sleep_for(nanoseconds(scope.length_s));
  core->simulator.advance(core->now_s());
  const std::string path = next_path(station);
  const std::uint64_t errors = key_of(core->description.seed, station.description.name + " scope");
  const std::uint64_t noise =
      key_of(core->description.run, "capture", {static_cast<std::uint64_t>(station.captures)});
  const std::string text = capture_csv(core->simulator.history(), core->simulator.plant().parameters(), scope,
                                       start_s, errors, noise);
  if (auto dropped = drop(path, text); !dropped) {
    core->note(station, "capture", station.captures, "", "", "failed: " + dropped.refusal().text());
    co_return dropped.refusal();
  }
  core->note(station, "capture", station.captures, "", "", path);
  co_return path;
}

net::awaitable<base::Outcome<TypedAnswer>> typed_answer(CorePtr core, std::string channel) {
  const TypedChannel* typed = nullptr;
  for (const TypedChannel& t : core->description.typed)
    if (t.channel == channel) typed = &t;
  if (typed == nullptr)
    co_return base::Refusal{"typed channel \"" + channel + "\"", "nobody at this bench knows that channel"};
  Station& station = *core->find(typed->instrument);
  const Meter& meter = core->simulator.meter(station.index);
  co_await core->clock.sleep_for(nanoseconds(typed->look_s));
  const std::int64_t read_ns = core->clock.now_ns();
  Shown shown = core->simulator.read(station.index, core->now_s())[meter.find(typed->function).value_or(0)];
  const std::int64_t number = ++station.queries;
  std::optional<Fault> fault;
  if (const Fault* found = station.plan.altering(core->now_s(), number)) fault = *found;
  co_await core->clock.sleep_for(nanoseconds(typed->type_s));
  if (fault && fault->kind == FaultKind::overload) shown.overload = true;
  const bool turned = fault && fault->kind == FaultKind::unit_change;
  const double scale = typed->unit_scale * (turned ? 1e-3 : 1.0);
  const double digit = shown.digit > 0.0 ? shown.digit : 1e-6 * scale;
  TypedAnswer answer;
  answer.value = shown.overload ? station.description.overload_word
                                : base::print_fixed(shown.value / scale, decimals_of(digit / scale));
  answer.unit = (turned ? "m" : "") + typed->unit;
  answer.range = plain(shown.full_scale / scale);
  answer.digit = plain(digit / scale);
  answer.read_ns = read_ns;
  core->note(station, "typed", number, fault ? std::string{name_of(fault->kind)} : "", channel,
             answer.value + " " + answer.unit + " " + answer.range + " " + answer.digit);
  co_return answer;
}

}  // namespace loadstair::rehearsal
