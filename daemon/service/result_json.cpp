#include "daemon/service/result_json.h"

#include <chrono>
#include <map>
#include <nlohmann/json.hpp>

#include "analysis/base/number.h"
#include "daemon/setup/hookup.h"
#include "daemon/setup/stair.h"

namespace loadstair::service {
namespace {

using evaluation::Quantity;
using nlohmann::json;

json temperature_json(const evaluation::TemperatureResult& temperature) {
  json result = {{"place", temperature.place},
                 {"channel", temperature.channel},
                 {"end", to_json(temperature.end)},
                 {"how", temperature.how.empty() ? json(nullptr) : json(temperature.how)}};
  if (temperature.ambient) result["ambient"] = to_json(*temperature.ambient);
  return result;
}

json settled_json(const evaluation::SettledResult& settled) {
  return {{"settled", settled.settled},
          {"by", settled.by},
          {"after_s", settled.after_s ? json(*settled.after_s) : json(nullptr)},
          {"text", settled.text}};
}

json budget_json(const evaluation::BudgetEntry& entry) {
  json result = {{"source", entry.source},
                 {"instrument", entry.instrument},
                 {"function", entry.function},
                 {"range", entry.range},
                 {"type", entry.type_a ? "A" : "B"},
                 {"standard_uncertainty", entry.standard_uncertainty},
                 {"share", entry.share},
                 {"action", entry.action}};
  if (entry.expanded_if_done) result["expanded_if_done"] = *entry.expanded_if_done;
  return result;
}

json port_json(const evaluation::PortResult& port) {
  return {{"name", port.name},
          {"direction", port.direction},
          {"counted", port.counted},
          {"state", port.state},
          {"method", port.method},
          {"power", to_json(port.power)},
          {"apparent_power", to_json(port.apparent_power)},
          {"power_factor", to_json(port.power_factor)},
          {"voltage", to_json(port.voltage)},
          {"current", to_json(port.current)},
          {"corrections", port.corrections}};
}

template <class Item>
json list_of(const std::vector<Item>& items, json (*print)(const Item&)) {
  json list = json::array();
  for (const auto& item : items) list.push_back(print(item));
  return list;
}

json step_json(const evaluation::StepResult& step) {
  return {{"label", step.label},
          {"load_w", step.load_w},
          {"state", step.state},
          {"result", step.result_state},
          {"input_power", to_json(step.input_power)},
          {"output_power", to_json(step.output_power)},
          {"efficiency", to_json(step.efficiency)},
          {"loss", to_json(step.loss)},
          {"power_factor", to_json(step.power_factor)},
          {"thd_voltage", to_json(step.thd_voltage)},
          {"crest_factor", to_json(step.crest_factor)},
          {"frequency", to_json(step.frequency)},
          {"temperatures", list_of(step.temperatures, &temperature_json)},
          {"settled", settled_json(step.settled)},
          {"budget", list_of(step.budget, &budget_json)},
          {"ports", list_of(step.ports, &port_json)},
          {"remarks", step.remarks}};
}

json curve_json(const evaluation::CurveEntry& entry) {
  return {{"label", entry.label},
          {"output_power", to_json(entry.output_power)},
          {"efficiency", to_json(entry.efficiency)},
          {"loss", to_json(entry.loss)}};
}

json weighted_json(const evaluation::WeightedResult& weighted) {
  json uses = json::array();
  for (const auto& use : weighted.uses) {
    uses.push_back({{"fraction", use.fraction},
                    {"weight", use.weight},
                    {"from", use.from},
                    {"efficiency", to_json(use.efficiency)}});
  }
  return {{"title", weighted.title}, {"efficiency", to_json(weighted.efficiency)}, {"uses", uses}};
}

}  // namespace

json to_json(const Quantity& quantity) {
  if (!quantity.known) return {{"value", nullptr}, {"why", quantity.why}};
  if (!quantity.uncertainty_known) {
    json result = {
        {"value", nullptr}, {"why", quantity.why}, {"indicated", quantity.value}, {"unit", quantity.unit}};
    if (quantity.lower_bound) result["at_least"] = true;
    return result;
  }
  json result = {{"value", quantity.value}, {"unit", quantity.unit},   {"low", quantity.low},
                 {"high", quantity.high},   {"level", quantity.level}, {"method", quantity.method}};
  if (quantity.expanded) result["expanded"] = *quantity.expanded;
  if (quantity.k) result["k"] = *quantity.k;
  if (quantity.lower_bound) result["at_least"] = true;
  return result;
}

json to_json(const evaluation::RunResult& result) {
  return {{"run", result.run},
          {"prototype", {{"name", result.prototype}, {"revision", result.revision}, {"unit", result.unit}}},
          {"state", result.state},
          {"method_version", result.method_version},
          {"steps", list_of(result.steps, &step_json)},
          {"curve", list_of(result.curve, &curve_json)},
          {"weighted", list_of(result.weighted, &weighted_json)},
          {"decisions", json::array()},
          {"remarks", result.remarks}};
}

json to_json(const std::vector<store::RunSummary>& runs) {
  json list = json::array();
  for (const auto& run : runs) {
    list.push_back({{"run", run.run},
                    {"prototype", {{"name", run.prototype}, {"revision", run.revision}, {"unit", run.unit}}},
                    {"state", std::string{store::name_of(run.state)}},
                    {"started", iso_time(run.started_ns)},
                    {"ended", run.ended_ns ? json(iso_time(*run.ended_ns)) : json(nullptr)},
                    {"steps", run.steps},
                    {"steps_done", run.steps_done},
                    {"sealed", run.sealed}});
  }
  return list;
}

std::string iso_time(std::int64_t utc_ns) {
  using namespace std::chrono;
  const sys_time<milliseconds> instant{floor<milliseconds>(nanoseconds{utc_ns})};
  const auto day = floor<days>(instant);
  const year_month_day date{day};
  const hh_mm_ss time{instant - day};
  const auto padded = [](long long value, std::size_t width) {
    std::string text = base::print_integer(value);
    return std::string(text.size() < width ? width - text.size() : 0, '0') + text;
  };
  return padded(static_cast<int>(date.year()), 4) + "-" + padded(static_cast<unsigned>(date.month()), 2) +
         "-" + padded(static_cast<unsigned>(date.day()), 2) + "T" + padded(time.hours().count(), 2) + ":" +
         padded(time.minutes().count(), 2) + ":" + padded(time.seconds().count(), 2) + "." +
         padded(time.subseconds().count(), 3) + "Z";
}

base::Outcome<evaluation::RunResult> results_of(const store::Reader& reader, store::RunId run) {
  const auto stored = reader.load_run(run);
  if (!stored) return stored.refusal();
  std::map<std::string, std::string> profiles;
  for (const auto& profile : stored->profiles) profiles[profile.name] = profile.text;
  const auto hookup = setup::read_hookup(stored->hookup_text, stored->hookup_file, profiles);
  if (!hookup) return hookup.refusal();
  const auto stair = setup::read_stair(stored->stair_text, stored->stair_file);
  if (!stair) return stair.refusal();
  return evaluation::evaluate(*stored, *hookup, *stair);
}

}  // namespace loadstair::service
