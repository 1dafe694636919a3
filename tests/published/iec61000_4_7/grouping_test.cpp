// Harmonic groups and subgroups (IEC 61000-4-7) of a synthesised window. Source: SOURCE.md.
#include <cmath>
#include <fstream>
#include <nlohmann/json.hpp>
#include <numbers>
#include <vector>

#include "analysis/waveform/waveform.h"
#include "tests/published/table.h"

namespace loadstair::waveform {
namespace {

TEST_CASE("groups, subgroups and their THD equal the synthesised window's") {
  std::ifstream file{std::string{LOADSTAIR_SOURCE} + "/tests/published/iec61000_4_7/vector.json"};
  const nlohmann::json vector = nlohmann::json::parse(file);
  const std::size_t samples = vector["samples"];
  std::vector<double> v(samples, 0.0);
  for (const auto& [bin, value] : vector["bins_rms"].items()) {
    const double k = base::parse_number(bin).value();
    const double amplitude = k == 0.0 ? value.get<double>() : std::numbers::sqrt2 * value.get<double>();
    for (std::size_t n = 0; n < samples; ++n) {
      const double angle =
          2.0 * std::numbers::pi * 5.0 * k * static_cast<double>(n) / vector["sample_rate"].get<double>();
      v[n] += k == 0.0 ? amplitude : amplitude * std::sin(angle + 0.37 * k);
    }
  }
  Waveform waveform;
  waveform.interval_s = 1.0 / vector["sample_rate"].get<double>();
  waveform.channels = {{.name = "v", .unit = "V", .values = v}};
  const auto result = analyse(waveform);
  REQUIRE(result);
  REQUIRE(result->window.coherent);
  const auto& groups = result->channels[0].groups;
  REQUIRE(groups);
  CHECK(groups->cycles_per_window == 10);
  CHECK(groups->windows == 1);
  REQUIRE(groups->orders.size() == 40);
  for (const auto& wanted : vector["results"]) {
    const std::size_t h = wanted["h"];
    INFO("order " << h);
    const GroupedOrder& order = groups->orders[h - 1];
    CHECK(std::abs(result->channels[0].harmonics[h - 1].rms - wanted["component_rms"].get<double>()) < 1e-9);
    CHECK(std::abs(order.group_rms - wanted["group_rms"].get<double>()) < 1e-9);
    CHECK(std::abs(order.subgroup_rms - wanted["subgroup_rms"].get<double>()) < 1e-9);
    CHECK(std::abs(order.interharmonic_rms - wanted["interharmonic_group_above_rms"].get<double>()) < 1e-9);
    CHECK(std::abs(order.interharmonic_subgroup_rms -
                   wanted["interharmonic_centred_subgroup_above_rms"].get<double>()) < 1e-9);
    CHECK(order.group_rms_low == order.group_rms);
    CHECK(order.group_rms_high == order.group_rms);
  }
  CHECK(*result->channels[0].thd_f == Approx(vector["THD_2_40"].get<double>()).epsilon(1e-9));
  CHECK(groups->thd_group == Approx(vector["THDG_2_40"].get<double>()).epsilon(1e-9));
  CHECK(groups->thd_subgroup == Approx(vector["THDS_2_40"].get<double>()).epsilon(1e-9));
}

}  // namespace
}  // namespace loadstair::waveform
