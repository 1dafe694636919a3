// Thermocouples against the printed ITS-90 tables and IEC 60584-1. Sources and their confirmation: SOURCE.md.
#include <cmath>

#include "analysis/sensors/sensors.h"
#include "tests/published/table.h"

namespace loadstair::sensors {
namespace {

using published::number;
using published::read_table;

Thermocouple type_of(const published::Row& row) {
  return parse_thermocouple(row.at("type")).value();
}

TEST_CASE("emf of the eight thermocouples equals the printed table to its last digit") {
  const auto rows = read_table("its90/table.csv");
  REQUIRE(rows.size() == 1211);
  for (const auto& row : rows) {
    const double t = number(row, "t90_degC");
    const auto emf = thermocouple_emf(type_of(row), t);
    INFO(row.at("type") << " at " << t);
    REQUIRE(emf);
    // Half of the last printed digit, 0.001 mV, and a margin for values that lie on the rounding edge.
    CHECK(std::abs(emf->value * 1e3 - number(row, "emf_mV_as_printed")) <= 0.0005 + 1e-9);
    // 12 digits after the point, or 12 significant ones.
    const double polynomial = number(row, "emf_mV_from_polynomial");
    CHECK(std::abs(emf->value * 1e3 - polynomial) <= 1e-11 * std::max(1.0, std::abs(polynomial)));
    const double seebeck = number(row, "seebeck_uV_per_K_from_polynomial");
    CHECK(std::abs(emf->sensitivity * 1e6 - seebeck) <= 1e-7 * std::max(1.0, std::abs(seebeck)));
  }
}

TEST_CASE("temperature from the printed emf is the table's, within the emf's last digit") {
  for (const auto& row : read_table("its90/table.csv")) {
    const Thermocouple type = type_of(row);
    const double t = number(row, "t90_degC");
    if (t <= inverse_range(type).low_degc || t >= inverse_range(type).high_degc) continue;
    const double seebeck_mv = number(row, "seebeck_uV_per_K_from_polynomial") * 1e-3;
    // Near absolute zero the slope changes within the printed digit; there the round trip below is the check.
    if (seebeck_mv < 0.002) continue;
    const auto found = thermocouple_temperature(type, number(row, "emf_mV_as_printed") * 1e-3);
    INFO(row.at("type") << " at " << t);
    REQUIRE(found);
    CHECK(std::abs(found->temperature_degc - t) <= 0.00051 / seebeck_mv * 1.1);
  }
}

TEST_CASE("cold junction and exact root agree with 40-digit values") {
  const auto rows = read_table("its90/inverse_and_cold_junction.csv");
  REQUIRE(rows.size() == 30);
  for (const auto& row : rows) {
    const double cold = number(row, "t_cold_junction_degC");
    const auto found = thermocouple_temperature(type_of(row), number(row, "measured_emf_mV") * 1e-3, cold);
    INFO(row.at("type") << ", " << row.at("measured_emf_mV") << " mV, cold junction " << cold);
    REQUIRE(found);
    // 12 significant digits are given.
    CHECK(found->temperature_degc == Approx(number(row, "t90_degC_exact_root")).epsilon(2e-11).margin(2e-9));
    const auto approximate =
        thermocouple_temperature_approximate(type_of(row), number(row, "emf_referred_to_0degC_mV") * 1e-3);
    REQUIRE(approximate);
    CHECK(*approximate == Approx(number(row, "t90_degC_from_published_inverse")).epsilon(1e-11).margin(1e-8));
  }
}

TEST_CASE("the published inverse stays within its recomputed bounds of the exact root") {
  for (const auto& row : read_table("its90/inverse_bounds.csv")) {
    const Thermocouple type = type_of(row);
    const double low = number(row, "t_min_degC");
    const double high = number(row, "t_max_degC");
    INFO(row.at("type") << ' ' << low << " to " << high);
    // R and S overlap between their second and third piece; the second is the one in use there.
    const bool third_overlaps = low == 1064.0;
    double least = 0.0;
    double most = 0.0;
    for (double t = third_overlaps ? 1200.5 : low + 0.05; t < high; t += 0.05) {
      const auto emf = thermocouple_emf(type, t);
      REQUIRE(emf);
      if (emf->value * 1e3 <= number(row, "e_min_mV") || emf->value * 1e3 >= number(row, "e_max_mV"))
        continue;
      const auto approximate = thermocouple_temperature_approximate(type, emf->value);
      REQUIRE(approximate);
      const double error = *approximate - t;
      CHECK(error >= number(row, "recomputed_error_min_K") - 2e-6);
      CHECK(error <= number(row, "recomputed_error_max_K") + 2e-6);
      least = std::min(least, error);
      most = std::max(most, error);
    }
    // The bounds are reached, so that they check the polynomial and not only its order of magnitude. Where
    // the extremes lie at an end of the piece or between the steps, nine tenths of the span.
    if (third_overlaps) continue;
    const double span = number(row, "recomputed_error_max_K") - number(row, "recomputed_error_min_K");
    CHECK(most - least >= 0.9 * span);
  }
}

TEST_CASE("tolerance classes are those of IEC 60584-1") {
  int checked = 0;
  for (const auto& row : read_table("its90/tolerances_iec60584.csv")) {
    const Thermocouple type = type_of(row);
    const int tolerance_class = static_cast<int>(number(row, "class"));
    INFO(row.at("type") << " class " << tolerance_class);
    if (row.at("rule") == "not defined") {
      CHECK_FALSE(thermocouple_tolerance_k(type, tolerance_class, 20.0));
      continue;
    }
    const double low = number(row, "t_min_degC");
    const double high = number(row, "t_max_degC");
    const double relative = number(row, "rel_per_degC");
    CHECK_FALSE(thermocouple_tolerance_k(type, tolerance_class, low - 1.0));
    CHECK_FALSE(thermocouple_tolerance_k(type, tolerance_class, high + 1.0));
    const bool knee = row.at("rule").find("1100") != std::string::npos;
    for (const double t : {low, 0.5 * (low + high), high}) {
      const double absolute = row.at("abs_degC").empty() ? 0.0 : number(row, "abs_degC");
      const double wanted = knee ? absolute + (t > 1100.0 ? relative * (t - 1100.0) : 0.0)
                                 : std::max(absolute, relative * std::abs(t));
      const auto got = thermocouple_tolerance_k(type, tolerance_class, t);
      REQUIRE(got);
      CHECK(*got == Approx(wanted).epsilon(1e-12));
      ++checked;
    }
  }
  CHECK(checked == 3 * 20);
}

}  // namespace
}  // namespace loadstair::sensors
