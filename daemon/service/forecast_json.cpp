#include "daemon/service/forecast_json.h"

#include <nlohmann/json.hpp>
#include <optional>

#include "daemon/service/result_json.h"
#include "daemon/service/result_parts.h"

namespace loadstair::service {
namespace {

using nlohmann::json;

json action_json(const std::optional<evaluation::BestAction>& best) {
  if (!best) return nullptr;
  return {{"source", best->source}, {"action", best->action}, {"expanded_if_done", best->expanded_if_done}};
}

json forecast_step_json(const evaluation::ForecastStep& step) {
  return {{"label", step.label},
          {"kind", step.kind},
          {"result_state", step.result_state},
          {"input_power", to_json(step.input_power)},
          {"output_power", to_json(step.output_power)},
          {"efficiency", to_json(step.efficiency)},
          {"loss", to_json(step.loss)},
          {"budget", list_of(step.budget, &budget_json)},
          {"loss_budget", list_of(step.loss_budget, &budget_json)},
          {"helps_most", action_json(step.best)},
          {"helps_loss_most", action_json(step.best_for_loss)},
          {"remarks", step.remarks}};
}

}  // namespace

json to_json(const evaluation::Forecast& forecast) {
  return {{"steps", list_of(forecast.steps, &forecast_step_json)},
          {"bench_checks", forecast.bench_checks},
          {"remarks", forecast.remarks}};
}

}  // namespace loadstair::service
