// Powers of nonsinusoidal voltages and currents (IEEE Std 1459-2010). Source: SOURCE.md.
#include <cmath>
#include <fstream>
#include <nlohmann/json.hpp>
#include <numbers>
#include <vector>

#include "analysis/waveform/waveform.h"
#include "tests/published/table.h"

namespace loadstair::waveform {
namespace {

using nlohmann::json;

/// sum of sqrt(2) V_h sin(h w t + alpha_h), plus the direct component.
std::vector<double> sampled(const json& phasors, double direct, double cycles_per_sample,
                            std::size_t samples) {
  std::vector<double> out(samples, direct);
  for (const auto& [order, phasor] : phasors.items()) {
    const double h = base::parse_number(order).value();
    const double amplitude = std::numbers::sqrt2 * phasor[0].get<double>();
    const double phase = phasor[1].get<double>() * std::numbers::pi / 180.0;
    for (std::size_t k = 0; k < samples; ++k) {
      out[k] += amplitude *
                std::sin(2.0 * std::numbers::pi * h * cycles_per_sample * static_cast<double>(k) + phase);
    }
  }
  return out;
}

void check_case(const json& item, double cycles_per_sample, double tolerance, double root_tolerance) {
  constexpr std::size_t kSamples = 4096;
  const auto v =
      sampled(item["V_rms_and_phase_deg"], item["V_dc"].get<double>(), cycles_per_sample, kSamples);
  const auto i =
      sampled(item["I_rms_and_phase_deg"], item["I_dc"].get<double>(), cycles_per_sample, kSamples);
  Waveform waveform;
  waveform.interval_s = cycles_per_sample / 50.0;
  waveform.channels = {{.name = "v", .unit = "V", .values = v}, {.name = "i", .unit = "A", .values = i}};
  waveform.voltage = 0;
  waveform.current = 1;
  const auto result = analyse(waveform);
  REQUIRE(result);
  REQUIRE(result->power);
  const Power& power = *result->power;
  REQUIRE(power.fundamental);
  const auto& set = *power.fundamental;
  const json& wanted = item["results"];
  const double s = wanted["S"].get<double>();
  const auto within = [&](const char* name, double got, double margin) {
    INFO(name << " = " << got << ", published " << wanted[name].get<double>());
    CHECK(std::abs(got - wanted[name].get<double>()) < margin);
  };
  const auto close = [&](const char* name, double got, double scale) {
    within(name, got, tolerance * scale);
  };
  // Square roots of differences of nearly equal squares, where a wave is pure.
  const auto root = [&](const char* name, double got, double scale) {
    within(name, got, root_tolerance * scale);
  };
  close("V", result->channels[0].rms.value, wanted["V"]);
  close("I", result->channels[1].rms.value, wanted["I"]);
  close("P", power.active_w, s);
  close("S", power.apparent_va, s);
  root("N", power.nonactive_var, s);
  close("PF", power.power_factor, 1.0);
  close("P1", set.active_w, s);
  close("Q1", set.reactive_var, s);
  close("S1", set.apparent_va, s);
  close("PH", set.harmonic_active_w, s);
  close("PF1", set.displacement_power_factor, 1.0);
  root("THDV", set.voltage_thd, 1.0);
  root("THDI", set.current_thd, 1.0);
  root("DI", set.current_distortion_var, s);
  root("DV", set.voltage_distortion_var, s);
  root("SH", set.harmonic_apparent_va, s);
  root("SN", set.nonfundamental_va, s);
  root("DH", set.harmonic_distortion_var, s);
  for (const auto& [order, p] : wanted["Ph"].items()) {
    const auto h = static_cast<std::size_t>(base::parse_integer(order).value()) - 1;
    CHECK(std::abs(set.active_by_order_w[h] - p.get<double>()) < tolerance * s);
    CHECK(std::abs(set.reactive_by_order_var[h] - wanted["Qh"][order].get<double>()) < tolerance * s);
  }
}

TEST_CASE("the IEEE 1459 set equals the worked cases") {
  std::ifstream file{std::string{LOADSTAIR_SOURCE} + "/tests/published/ieee1459/cases.json"};
  const json cases = json::parse(file)["cases"];
  REQUIRE(cases.size() == 7);
  for (const json& item : cases) {
    INFO(item["id"].get<std::string>());
    // Coherent: 12 digits are published; square roots of rounding are 1e-7.
    check_case(item, 16.0 / 4096.0, 2e-11, 1e-7);
    // Off the grid, 14.6 cycles of 280 samples: the ends' correction errs by (2 pi 7/280)^6/280 at order 7.
    check_case(item, 14.6 / 4096.0, 1e-7, 1e-5);
  }
}

}  // namespace
}  // namespace loadstair::waveform
