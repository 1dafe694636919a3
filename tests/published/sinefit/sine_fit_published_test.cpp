// Three- and four-parameter sine fits (IEEE Std 1057) against 40-digit solutions. Source: SOURCE.md.
#include <cmath>
#include <vector>

#include "analysis/waveform/sine_fit.h"
#include "tests/published/table.h"

namespace loadstair::waveform {
namespace {

using published::number;
using published::read_table;

TEST_CASE("sine fits equal the 40-digit least-squares solutions") {
  const auto vectors = read_table("sinefit/vectors.csv");
  const auto rows = read_table("sinefit/results.csv");
  REQUIRE(rows.size() == 10);
  for (const auto& row : rows) {
    std::vector<double> samples;
    const auto count = static_cast<std::size_t>(number(row, "samples"));
    for (std::size_t k = 0; k < count; ++k) samples.push_back(number(vectors[k], row.at("vector")));
    const bool four = number(row, "parameters") == 4.0;
    const double start = number(row, "start_frequency");
    const auto fit = four ? fit_sine_and_frequency(samples, start) : fit_sine(samples, start);
    INFO(row.at("vector") << ", " << row.at("parameters") << " parameters");
    REQUIRE(fit);
    const double amplitude = number(row, "amplitude");
    // The solutions are exact to 16 digits; normal equations of a well-posed problem leave 1e-11 of the
    // amplitude.
    const double tolerance = 1e-11 * amplitude;
    CHECK(std::abs(fit->cosine - number(row, "A_cos")) < tolerance);
    CHECK(std::abs(fit->sine - number(row, "B_sin")) < tolerance);
    CHECK(std::abs(fit->offset - number(row, "C")) < 1e-11 * std::max(amplitude, std::abs(number(row, "C"))));
    CHECK(fit->frequency == Approx(number(row, "frequency")).epsilon(1e-12));
    CHECK(fit->amplitude() == Approx(amplitude).epsilon(1e-11));
    CHECK(fit->phase_rad() == Approx(number(row, "phase_rad")).epsilon(1e-10));
    // Residuals are given to 10 digits.
    CHECK(std::abs(fit->rms_residual - number(row, "rms_residual")) <
          1e-9 * number(row, "rms_residual") + 1e-13 * amplitude);
  }
}

TEST_CASE("what cannot be fitted is refused") {
  const std::vector<double> constant(50, 2.0);
  CHECK_FALSE(fit_sine(std::vector<double>{1.0, 2.0}, 0.1));
  CHECK_FALSE(fit_sine(constant, 0.6));
  CHECK_FALSE(fit_sine_and_frequency(constant, 0.1));
  CHECK_FALSE(largest_line(constant, 0.0, 0.5));
  std::vector<double> broken(50, 1.0);
  broken[7] = std::nan("");
  const auto refused = fit_sine(broken, 0.1);
  REQUIRE_FALSE(refused);
  CHECK(refused.refusal().reason == "sample 8 is missing or not finite");
}

}  // namespace
}  // namespace loadstair::waveform
