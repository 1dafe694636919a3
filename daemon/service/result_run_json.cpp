#include <nlohmann/json.hpp>

#include "daemon/service/result_json.h"
#include "daemon/service/result_parts.h"

namespace loadstair::service {
namespace {

using nlohmann::json;

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

json model_json(const evaluation::ModelResult& model) {
  return {{"span", model.span},
          {"p0", to_json(model.p0)},
          {"p1", to_json(model.p1)},
          {"p2", to_json(model.p2)},
          {"chi_squared", model.chi_squared},
          {"degrees_of_freedom", model.degrees_of_freedom},
          {"lack_of_fit", model.lack_of_fit},
          {"used", model.used},
          {"peak_power", to_json(model.peak_power)},
          {"peak_efficiency", to_json(model.peak_efficiency)}};
}

json bench_check_json(const evaluation::BenchCheckResult& check) {
  json result = {{"kind", check.kind},
                 {"name", check.name},
                 {"channel", check.channel},
                 {"applied", check.applied},
                 {"text", check.text}};
  if (check.kind == "zero") {
    result["before"] = to_json(check.before);
    result["after"] = to_json(check.after);
  } else {
    result["ratio"] = to_json(check.ratio);
    result["offset"] = to_json(check.offset);
  }
  return result;
}

json closure_json(const evaluation::ClosureResult& closure) {
  return {{"label", closure.label},     {"again", closure.again}, {"difference", to_json(closure.difference)},
          {"allowed", closure.allowed}, {"held", closure.held},   {"text", closure.text}};
}

json decision_json(const evaluation::DecisionResult& decision) {
  json result = {{"name", decision.name},         {"quantity", decision.quantity},
                 {"step", decision.step},         {"value", to_json(decision.value)},
                 {"decision", decision.decision}, {"source", decision.source},
                 {"text", decision.text}};
  if (decision.low) result["low"] = *decision.low;
  if (decision.high) result["high"] = *decision.high;
  if (decision.probability) result["probability"] = *decision.probability;
  return result;
}

json fold_back_json(const evaluation::FoldBackResult& fold_back) {
  return {{"knee_current", to_json(fold_back.knee_current)},
          {"knee_power", to_json(fold_back.knee_power)},
          {"expected_current", to_json(fold_back.expected_current)},
          {"sense", fold_back.sense},
          {"text", fold_back.text}};
}

json start_up_json(const evaluation::StartUpResult& start_up) {
  return {{"rise_time", to_json(start_up.rise_time)},
          {"overshoot", to_json(start_up.overshoot)},
          {"monotonic", start_up.monotonic},
          {"text", start_up.text}};
}

}  // namespace

json run_json(const evaluation::RunResult& run) {
  json result = {{"run", run.run},
                 {"prototype", {{"name", run.prototype}, {"revision", run.revision}, {"unit", run.unit}}},
                 {"state", run.state},
                 {"method_version", run.method_version},
                 {"curve", list_of(run.curve, &curve_json)},
                 {"weighted", list_of(run.weighted, &weighted_json)},
                 {"models", list_of(run.models, &model_json)},
                 {"no_load", to_json(run.no_load)},
                 {"standby", to_json(run.standby)},
                 {"load_regulation", to_json(run.load_regulation)},
                 {"line_regulation", to_json(run.line_regulation)},
                 {"bench_checks", list_of(run.bench_checks, &bench_check_json)},
                 {"closure", list_of(run.closure, &closure_json)},
                 {"decisions", list_of(run.decisions, &decision_json)},
                 {"decision_rule", run.decision_rule},
                 {"remarks", run.remarks}};
  if (run.fold_back) result["fold_back"] = fold_back_json(*run.fold_back);
  if (run.start_up) result["start_up"] = start_up_json(*run.start_up);
  return result;
}

}  // namespace loadstair::service
