#include "daemon/service/compare_json.h"

#include <nlohmann/json.hpp>

#include "daemon/service/result_json.h"
#include "daemon/service/result_parts.h"

namespace loadstair::service {
namespace {

using nlohmann::json;

json figure_json(const evaluation::DifferenceResult& of) {
  json result = {{"label", of.label},
                 {"difference", to_json(of.difference)},
                 {"decision", of.decision},
                 {"text", of.text}};
  if (!of.difference.known) return result;
  result["unshared_share"] = of.unshared_share;
  result["flips_at"] = of.flips_at ? json(*of.flips_at) : json(nullptr);
  result["narrowing"] = of.narrowing;
  return result;
}

json level_json(const evaluation::DifferenceResult& of) {
  json result = figure_json(of);
  if (of.difference.known) result["load_w"] = of.load_w;
  result["loss_difference"] = to_json(of.loss_difference);
  return result;
}

}  // namespace

json to_json(const evaluation::ComparisonResult& comparison) {
  return {{"reference", comparison.reference},
          {"run", comparison.run},
          {"reference_unit", comparison.reference_unit},
          {"unit", comparison.unit},
          {"levels", list_of(comparison.levels, &level_json)},
          {"weighted", list_of(comparison.weighted, &figure_json)},
          {"remarks", comparison.remarks}};
}

base::Outcome<evaluation::ComparisonResult> comparison_of(const store::Reader& reader, store::RunId reference,
                                                          store::RunId other) {
  const auto first = results_of(reader, reference);
  if (!first) return first.refusal();
  const auto second = results_of(reader, other);
  if (!second) return second.refusal();
  return evaluation::compare(*first, *second);
}

}  // namespace loadstair::service
