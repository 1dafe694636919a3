#include <nlohmann/json.hpp>

#include "daemon/service/result_json.h"
#include "daemon/service/result_parts.h"

namespace loadstair::service {
namespace {

using nlohmann::json;

json temperature_json(const evaluation::TemperatureResult& temperature) {
  json result = {{"place", temperature.place},
                 {"channel", temperature.channel},
                 {"end", to_json(temperature.end)},
                 {"how", temperature.how.empty() ? json(nullptr) : json(temperature.how)}};
  if (temperature.ambient) result["ambient"] = to_json(*temperature.ambient);
  if (temperature.thermal_resistance) result["thermal_resistance"] = to_json(*temperature.thermal_resistance);
  if (temperature.at_highest_ambient) result["at_highest_ambient"] = to_json(*temperature.at_highest_ambient);
  if (const auto& out = temperature.hold_out) {
    result["hold_out"] = {{"after_s", out->after_s}, {"predicted", out->predicted}, {"low", out->low},
                          {"high", out->high},       {"measured", out->measured},   {"held", out->held},
                          {"text", out->text}};
  }
  return result;
}

json settled_json(const evaluation::SettledResult& settled) {
  return {{"settled", settled.settled},
          {"by", settled.by},
          {"after_s", settled.after_s ? json(*settled.after_s) : json(nullptr)},
          {"text", settled.text}};
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

json validation_json(const evaluation::Validation& validation) {
  return {{"agrees", validation.agrees},
          {"draws", validation.draws},
          {"low_difference", validation.low_difference},
          {"high_difference", validation.high_difference},
          {"tolerance", validation.tolerance},
          {"text", validation.text}};
}

}  // namespace

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

json step_json(const evaluation::StepResult& step) {
  json result = {{"label", step.label},
                 {"kind", step.kind},
                 {"load_w", step.load_w},
                 {"state", step.state},
                 {"result", step.result_state},
                 {"input_power", to_json(step.input_power)},
                 {"output_power", to_json(step.output_power)},
                 {"efficiency", to_json(step.efficiency)},
                 {"loss", to_json(step.loss)},
                 {"power_factor", to_json(step.power_factor)},
                 {"thd_voltage", to_json(step.thd_voltage)},
                 {"thd_current", to_json(step.thd_current)},
                 {"crest_factor", to_json(step.crest_factor)},
                 {"dc_component", to_json(step.dc_component)},
                 {"frequency", to_json(step.frequency)},
                 {"temperatures", list_of(step.temperatures, &temperature_json)},
                 {"settled", settled_json(step.settled)},
                 {"budget", list_of(step.budget, &budget_json)},
                 {"loss_budget", list_of(step.loss_budget, &budget_json)},
                 {"ports", list_of(step.ports, &port_json)},
                 {"remarks", step.remarks}};
  if (step.loss_projected) result["loss_projected"] = to_json(*step.loss_projected);
  if (step.efficiency_projected) result["efficiency_projected"] = to_json(*step.efficiency_projected);
  if (!step.projection_text.empty()) result["projection"] = step.projection_text;
  if (step.validation) result["validation"] = validation_json(*step.validation);
  return result;
}

}  // namespace loadstair::service
