// Every refusal is a clear state: whatever is missing of a run, no table holds a number that is none, and
// what has no value says why.
#include <catch2/catch.hpp>
#include <cmath>
#include <nlohmann/json.hpp>

#include "daemon/service/result_json.h"
#include "simulation/mutilate.h"
#include "simulation/study.h"

using namespace loadstair;
using namespace loadstair::simulation;

namespace {

/// Figures that may be absent because they do not apply; everything else that is null says why.
bool may_be_absent(const std::string& key) {
  static const std::vector<std::string> kKeys = {"expanded_if_done", "probability", "low", "high", "after_s"};
  return std::find(kKeys.begin(), kKeys.end(), key) != kKeys.end();
}

/// What is wrong anywhere below, as lines "path: fault".
void faults_of(const nlohmann::json& node, const std::string& path, std::string& into) {
  if (node.is_number_float() && !std::isfinite(node.get<double>())) into += path + ": not finite\n";
  if (node.is_array()) {
    for (std::size_t i = 0; i < node.size(); ++i) faults_of(node[i], path + "/" + std::to_string(i), into);
  }
  if (!node.is_object()) return;
  const bool says_why =
      node.contains("why") && node["why"].is_string() && !node["why"].get<std::string>().empty();
  for (const auto& [key, child] : node.items()) {
    const std::string at = path + "/" + key;
    if (child.is_null() && !says_why && !may_be_absent(key)) into += at + ": null without a why\n";
    faults_of(child, at, into);
  }
  if (!node.contains("value") || !node["value"].is_number() || !node.contains("low")) return;
  if (!node["low"].is_number() || !node["high"].is_number()) return;
  const double value = node["value"];
  if (node.contains("level") && !(node["low"] <= value && value <= node["high"]))
    into += path + ": the value is outside its own interval\n";
}

/// NaN as JSON is null: the quantities themselves are looked at too.
void faults_of(const evaluation::Quantity& quantity, const std::string& name, std::string& into) {
  if (quantity.known && !std::isfinite(quantity.value)) into += name + ": known, and not finite\n";
  if (!quantity.known && quantity.why.empty()) into += name + ": not known, and no why\n";
  if (!quantity.known) return;
  if (!quantity.uncertainty_known) {
    if (quantity.why.empty()) into += name + ": uncertainty not known, and no why\n";
    return;
  }
  const bool finite = std::isfinite(quantity.low) && std::isfinite(quantity.high) &&
                      std::isfinite(quantity.expanded.value_or(0.0)) &&
                      std::isfinite(quantity.k.value_or(0.0));
  if (!finite) into += name + ": an interval that is not finite\n";
  if (quantity.unit.empty()) into += name + ": no unit\n";
}

std::string faults_of(const evaluation::RunResult& run) {
  std::string text;
  for (const evaluation::StepResult& step : run.steps) {
    const std::string at = step.label + ": ";
    if (step.result_state.empty()) text += at + "no state\n";
    faults_of(step.input_power, at + "input power", text);
    faults_of(step.output_power, at + "output power", text);
    faults_of(step.efficiency, at + "efficiency", text);
    faults_of(step.loss, at + "loss", text);
    faults_of(step.power_factor, at + "power factor", text);
    faults_of(step.thd_voltage, at + "thd", text);
    faults_of(step.crest_factor, at + "crest factor", text);
    faults_of(step.frequency, at + "frequency", text);
    for (const auto& temperature : step.temperatures)
      faults_of(temperature.end, at + temperature.place, text);
    for (const auto& port : step.ports) {
      if (port.state.empty()) text += at + port.name + " has no state\n";
      for (const evaluation::Quantity* one :
           {&port.power, &port.apparent_power, &port.power_factor, &port.voltage, &port.current}) {
        faults_of(*one, at + port.name, text);
      }
    }
    for (const auto& entry : step.budget) {
      if (!std::isfinite(entry.share) || !std::isfinite(entry.standard_uncertainty))
        text += at + "budget: " + entry.source + " is not finite\n";
    }
  }
  for (const auto& entry : run.curve) {
    for (const evaluation::Quantity* one : {&entry.output_power, &entry.efficiency, &entry.loss})
      faults_of(*one, "curve " + entry.label, text);
  }
  for (const auto& weighted : run.weighted) faults_of(weighted.efficiency, weighted.title, text);
  for (const auto& model : run.models) {
    for (const evaluation::Quantity* one :
         {&model.p0, &model.p1, &model.p2, &model.peak_power, &model.peak_efficiency})
      faults_of(*one, "model of " + model.span, text);
  }
  for (const evaluation::Quantity* one :
       {&run.no_load, &run.standby, &run.load_regulation, &run.line_regulation})
    faults_of(*one, "figure of the run", text);
  for (const auto& decision : run.decisions) faults_of(decision.value, decision.name, text);
  return text;
}

}  // namespace

TEST_CASE("whatever is missing of a run, its results say what, and hold no number that is none") {
  std::size_t judged = 0;
  std::size_t without_efficiency = 0;
  // Benches by number: linked and typed, DC and AC among the first ones.
  for (const std::uint64_t seed : {1U, 2U, 3U, 4U, 5U, 6U, 7U, 8U, 9U, 10U, 11U, 12U}) {
    const Bench bench = draw_bench(seed);
    const Recorded recorded = record_run(bench, bench.board, {0, 2}, 1);
    // Monte Carlo is most of the cost: on one bench.
    const auto validating = seed == 1 ? evaluation::Validate::yes : evaluation::Validate::no;
    for (const Mutilation& one : mutilations()) {
      store::StoredRun run = recorded.run;
      setup::Hookup hookup = hookup_of(bench);
      one.apply(run, hookup);
      const evaluation::RunResult result = evaluation::evaluate(run, hookup, recorded.stair, validating);
      INFO("bench " << seed << ", " << one.name);
      CHECK(faults_of(result) == "");
      std::string faults;
      faults_of(service::to_json(result), "", faults);
      CHECK(faults == "");
      ++judged;
      for (const auto& step : result.steps) without_efficiency += step.efficiency.known ? 0U : 1U;
    }
  }
  CHECK(judged > 600);
  CHECK(without_efficiency > 200);  // the harms do reach the results
}
