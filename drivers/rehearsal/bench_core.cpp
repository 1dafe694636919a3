#include "drivers/rehearsal/bench_core.h"

#include <algorithm>
#include <cmath>
#include <cstdio>
#include <fstream>

#include "analysis/base/number.h"

namespace loadstair::rehearsal {

namespace {

constexpr double kSecond_ns = 1e9;

bool has_function(const InstrumentDescription& d, const std::string& name) {
  return std::any_of(d.meter.functions.begin(), d.meter.functions.end(),
                     [&](const MeterFunction& f) { return f.name == name; });
}

std::string json_text(std::string_view text) {
  constexpr std::string_view kHex = "0123456789abcdef";
  std::string out = "\"";
  for (const char c : text) {
    const auto byte = static_cast<unsigned char>(c);
    if (c == '"' || c == '\\') {
      out += '\\';
      out += c;
    } else if (byte < 0x20) {
      out += "\\u00";
      out += kHex[byte >> 4U];
      out += kHex[byte & 15U];
    } else {
      out += c;
    }
  }
  return out + "\"";
}

std::string step_json(const std::string& label, const Truth& truth) {
  const auto field = [](std::string_view name, double value) {
    return ", \"" + std::string{name} + "\": " + base::print_number(value);
  };
  return "    {\"label\": " + json_text(label) + field("input_power_w", truth.input_power_w) +
         field("output_power_w", truth.output_power_w) + field("efficiency", truth.efficiency) +
         field("loss_w", truth.loss_w) + field("junction_c", truth.junction_c) +
         field("case_c", truth.case_c) + field("ambient_c", truth.ambient_c) + "}";
}

}  // namespace

BenchCore::BenchCore(boost::asio::any_io_executor executor_of_tasks, link::Clock& clock_of_bench,
                     BenchDescription what)
    : executor{std::move(executor_of_tasks)},
      clock{clock_of_bench},
      description{std::move(what)},
      simulator{description},
      tasks{executor, [](const std::exception_ptr&) {}},
      stop_notice{clock, executor} {
  for (std::size_t i = 0; i < description.instruments.size(); ++i)
    stations.push_back(std::make_unique<Station>(description.instruments[i], i));
  start_ns = clock.now_ns();
  start_utc_offset_ns = clock.utc_offset_ns();
}

Station* BenchCore::find(const std::string& instrument) {
  for (const auto& station : stations)
    if (station->description.name == instrument) return station.get();
  return nullptr;
}

void BenchCore::note(const Station& station, std::string kind, std::int64_t number, std::string fault,
                     std::string query, std::string reply) {
  const std::int64_t now = clock.now_ns();
  log.add({now, now + clock.utc_offset_ns(), station.description.name, std::move(kind), number,
           std::move(fault), std::move(query), std::move(reply)});
}

base::Outcome<void> BenchCore::check() const {
  const auto known = [&](const std::string& name) -> const InstrumentDescription* {
    for (const InstrumentDescription& i : description.instruments)
      if (i.name == name) return &i;
    return nullptr;
  };
  for (const InstrumentDescription& i : description.instruments) {
    const std::string place = "rehearsed instrument \"" + i.name + "\"";
    if (i.name.empty()) return base::Refusal{"rehearsal", "an instrument without a name"};
    if (known(i.name) != &i) return base::Refusal{place, "there are two of this name"};
    std::vector<std::string> asked;
    for (const ScpiQuery& q : i.queries) asked.insert(asked.end(), q.functions.begin(), q.functions.end());
    for (const auto& line : i.lines)
      for (const LineField& field : line) asked.push_back(field.function);
    for (const std::string& name : asked)
      if (!name.empty() && !has_function(i, name))
        return base::Refusal{place, "it has no function \"" + name + "\" that a query or a line could show"};
    const bool needs_folder = i.link == LinkKind::pty;
    if (needs_folder && description.folder.empty())
      return base::Refusal{place, "a pty needs a folder to publish its name in"};
  }
  for (const TypedChannel& t : description.typed) {
    const InstrumentDescription* i = known(t.instrument);
    const std::string place = "typed channel \"" + t.channel + "\"";
    if (i == nullptr) return base::Refusal{place, "there is no instrument \"" + t.instrument + "\""};
    if (!has_function(*i, t.function))
      return base::Refusal{place, "\"" + t.instrument + "\" has no function \"" + t.function + "\""};
  }
  for (const Fault& f : description.faults)
    if (known(f.instrument) == nullptr)
      return base::Refusal{"fault script", "there is no instrument \"" + f.instrument + "\""};
  return {};
}

void BenchCore::inject(Fault fault) {
  Station* station = find(fault.instrument);
  if (station == nullptr) return;
  station->plan.add(fault);
  if (fault.kind != FaultKind::vanish || !fault.at_s) return;
  tasks.spawn([](CorePtr core, Station& vanishing, Fault later) -> link::Wait {
    co_await core->clock.sleep_until(core->start_ns + static_cast<std::int64_t>(*later.at_s * kSecond_ns));
    vanish(core, vanishing, later.length_s);
  }(shared_from_this(), *station, std::move(fault)));
}

base::Outcome<Truth> BenchCore::truth_over(std::int64_t from_ns, std::int64_t to_ns) {
  if (to_ns <= from_ns) return base::Refusal{"truth", "the window is empty"};
  if (from_ns < start_ns || to_ns > clock.now_ns())
    return base::Refusal{"truth", "the window begins before the bench started or ends after now"};
  simulator.advance(seconds(to_ns));
  return simulator.history().truth(seconds(from_ns), seconds(to_ns));
}

base::Outcome<void> BenchCore::write_truth(const std::string& path, const std::vector<TruthWindow>& asked) {
  std::string text = "{\n  \"steps\": [\n";
  for (std::size_t i = 0; i < asked.size(); ++i) {
    // Windows are told in the run's time: UTC offset at its start plus the monotonic clock.
    auto truth = truth_over(asked[i].from_ns - start_utc_offset_ns, asked[i].to_ns - start_utc_offset_ns);
    if (!truth) return base::Refusal{"window \"" + asked[i].label + "\"", truth.refusal().reason};
    text += step_json(asked[i].label, *truth) + (i + 1 < asked.size() ? ",\n" : "\n");
  }
  text += "  ]\n}\n";
  const std::string part = path + ".part";
  {
    std::ofstream out{part, std::ios::binary | std::ios::trunc};
    out << text << std::flush;
    if (!out)
      return base::Refusal{path, "the truth cannot be written there; is the folder there and writable?"};
  }
  if (std::rename(part.c_str(), path.c_str()) != 0)
    return base::Refusal{path, "the truth cannot be moved to its name; is something else there?"};
  return {};
}

void BenchCore::ask_to_stop() {
  stop_asked = true;
  stop_notice.notify();
}

}  // namespace loadstair::rehearsal
