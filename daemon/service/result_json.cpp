#include "daemon/service/result_json.h"

#include <chrono>
#include <map>
#include <nlohmann/json.hpp>

#include "analysis/base/number.h"
#include "daemon/service/result_parts.h"
#include "daemon/setup/hookup.h"
#include "daemon/setup/stair.h"

namespace loadstair::service {

using evaluation::Quantity;
using nlohmann::json;

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
  json steps = json::array();
  for (const auto& step : result.steps) steps.push_back(step_json(step));
  json all = run_json(result);
  all["steps"] = std::move(steps);
  return all;
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
