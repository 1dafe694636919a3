// Sine-triangle PWM against its double Fourier series. Source: SOURCE.md.
#include <cmath>
#include <map>
#include <numbers>
#include <numeric>
#include <vector>

#include "analysis/waveform/carrier.h"
#include "analysis/waveform/waveform.h"
#include "tests/analysis/random_source.h"
#include "tests/published/table.h"

namespace loadstair::waveform {
namespace {

using published::number;

constexpr double kPi = std::numbers::pi;

/// Share of the sample's interval [y, y + dy) during which M cos lies above the carrier, as a level from -1
/// to 1: the signal is averaged over each sample, so that its spectrum is that of the switched signal times a
/// known sinc. Edges are found by bisection on the exact crossing.
double averaged_leg(double modulation, double ratio, double y, double dy) {
  const auto above = [&](double at) {
    double x = std::remainder(ratio * at, 2.0 * kPi);
    return modulation * std::cos(at) - (-1.0 + 2.0 * std::abs(x) / kPi);
  };
  double inside = 0.0;
  constexpr int kParts = 4;
  for (int part = 0; part < kParts; ++part) {
    double a = y + dy * part / kParts;
    double b = y + dy * (part + 1) / kParts;
    const bool a_up = above(a) > 0.0;
    const bool b_up = above(b) > 0.0;
    if (a_up == b_up) {
      inside += a_up ? b - a : 0.0;
      continue;
    }
    const double start = a, stop = b;
    for (int i = 0; i < 60; ++i) {
      const double middle = 0.5 * (a + b);
      ((above(middle) > 0.0) == a_up ? a : b) = middle;
    }
    inside += a_up ? a - start : stop - a;
  }
  return 2.0 * inside / dy - 1.0;
}

TEST_CASE("the spectrum of two- and three-level PWM is that of the double Fourier series") {
  constexpr std::size_t kPerCycle = 16384;
  constexpr int kCycles = 3;
  constexpr double kStep = 2.0 * kPi / kPerCycle;
  std::vector<double> two(kPerCycle * kCycles), three(kPerCycle * kCycles);
  for (std::size_t k = 0; k < two.size(); ++k) {
    const double y =
        kStep * (static_cast<double>(k % kPerCycle) - 0.5);  // averaged about the sample's own time
    two[k] = averaged_leg(0.8, 21.0, y, kStep);
    three[k] = 0.5 * (two[k] - averaged_leg(-0.8, 21.0, y, kStep));
  }
  Waveform waveform;
  waveform.interval_s = 0.02 / kPerCycle;
  waveform.channels = {{.name = "two", .unit = "V", .values = two},
                       {.name = "three", .unit = "V", .values = three}};
  AnalysisSettings settings;
  settings.harmonics = 130;
  settings.fundamental_hz = 50.0;  // the carrier of two-level PWM is the larger line
  const auto result = analyse(waveform, settings);
  REQUIRE(result);
  REQUIRE(result->window.coherent);
  REQUIRE(result->window.cycles == kCycles);
  for (const auto& row : published::read_table("spwm/spectrum_m0.8_ratio21.csv")) {
    const double order = number(row, "harmonic_order");
    INFO("order " << order);
    const double angle = order * kStep / 2.0;
    const double averaging = std::sin(angle) / angle;
    const auto h = static_cast<std::size_t>(order) - 1;
    const char* columns[] = {"two_level_amplitude_double_fourier", "three_level_amplitude_double_fourier"};
    for (std::size_t c = 0; c < 2; ++c) {
      const Harmonic& line = result->channels[c].harmonics[h];
      const double wanted = number(row, columns[c]) * averaging;
      const double got = line.rms * std::numbers::sqrt2 * std::cos(line.phase_deg * kPi / 180.0);
      // 1e-10 is printed. Lines near the sampling rate, order 16384 (side lines of carrier multiple 780, at
      // most 4/(pi 780)), fold back, reduced by the averaging to order/16384 of themselves.
      CHECK(std::abs(got - wanted) < 1e-9 + 4.0 / (kPi * 780.0) * order / kPerCycle);
    }
  }
}

/// Amplitude by order of one column of a table.
std::map<int, double> column_of(const char* file, const char* column) {
  std::map<int, double> out;
  for (const auto& row : published::read_table(file)) {
    out[static_cast<int>(number(row, "harmonic_order"))] = number(row, column);
  }
  return out;
}

/// Carrier groups against the table: 0.5 % of every line above 0.02, and of the smaller ones to `floor`.
void compare_groups(const CarrierGroups& groups, const std::map<int, double>& table, double floor,
                    int least) {
  CHECK(groups.synchronous);
  CHECK(groups.ratio == Approx(400.0).epsilon(1e-9));
  int compared = 0;
  for (const CarrierGroup& group : groups.groups) {
    for (const CarrierLine& line : group.lines) {
      const int order = 400 * group.multiple + line.sideband;
      const auto found = table.find(order);
      const double wanted = found == table.end() ? 0.0 : std::abs(found->second);
      const double got = line.line.rms * std::numbers::sqrt2;
      INFO("order " << order);
      CHECK(std::abs(got - wanted) < 0.005 * wanted + floor);
      if (wanted <= 0.02) continue;
      ++compared;
      CHECK(std::abs(got / wanted - 1.0) < 0.005);
    }
  }
  CHECK(compared >= least);
}

/// Baseband harmonics of naturally sampled PWM are not there: each is named, and no THD is claimed.
void nothing_in_baseband(const ChannelResult& channel) {
  std::vector<int> all(39);
  std::iota(all.begin(), all.end(), 2);
  CHECK(channel.orders_below_floor == all);
  REQUIRE(channel.thd_f);
  CHECK(*channel.thd_f < 1.3 * channel.thd_floor);
  // The carrier is in the residual and in the total distortion, sqrt(2/M^2 - 1) for two levels; not in the
  // floor.
  CHECK(channel.thd_floor < 1e-3);
  CHECK(channel.residual_rms > 0.3);
}

TEST_CASE(
    "ratio 400: carrier groups are the Bessel series', baseband harmonics are named as below the floor") {
  constexpr std::size_t kPerCycle = 32768;
  constexpr int kCycles = 10;
  constexpr double kStep = 2.0 * kPi / kPerCycle;
  const char* table = "spwm/spectrum_m0.8_ratio400.csv";
  const auto two_table = column_of(table, "two_level_amplitude_double_fourier");
  const auto three_table = column_of(table, "three_level_amplitude_double_fourier");
  tests::RandomSource random{tests::seed_of_tests()};
  AnalysisSettings settings;
  settings.fundamental_hz = 50.0;
  CarrierSettings carrier;
  carrier.carrier_hz = 20000.0;
  carrier.multiples = 5;

  // Once as the sum of the table's lines with noise, once as the switched signal averaged over each sample by
  // a scope of 8 bits: steps of 1/100, noise of one step.
  std::vector<double> sum(kPerCycle, 0.0), two(kPerCycle), three(kPerCycle);
  for (const auto& [order, amplitude] : two_table) {
    for (std::size_t k = 0; k < kPerCycle; ++k) {
      sum[k] +=
          amplitude * std::cos(kStep * static_cast<double>(static_cast<std::size_t>(order) * k % kPerCycle));
    }
  }
  for (std::size_t k = 0; k < kPerCycle; ++k) {
    const double y = kStep * (static_cast<double>(k) - 0.5);
    two[k] = averaged_leg(0.8, 400.0, y, kStep);
    three[k] = 0.5 * (two[k] - averaged_leg(-0.8, 400.0, y, kStep));
  }
  constexpr double kNoise = 0.01;
  const auto captured = [&](const std::vector<double>& cycle, bool eight_bits) {
    std::vector<double> out;
    for (std::size_t k = 0; k < kPerCycle * kCycles; ++k) {
      const double value = cycle[k % kPerCycle] + kNoise * random.normal();
      out.push_back(eight_bits ? 0.01 * std::round(value / 0.01) : value);
    }
    return out;
  };
  const std::vector<std::vector<double>> records = {captured(sum, false), captured(two, true),
                                                    captured(three, true)};
  Waveform waveform;
  waveform.interval_s = 0.02 / kPerCycle;
  waveform.channels = {{.name = "sum", .unit = "V", .values = records[0]},
                       {.name = "two", .unit = "V", .values = records[1]},
                       {.name = "three", .unit = "V", .values = records[2]}};
  const auto result = analyse(waveform, settings);
  REQUIRE(result);
  for (const ChannelResult& channel : result->channels) {
    INFO(channel.name);
    nothing_in_baseband(channel);
    // Steps of 0.01 add 0.01/sqrt 12 to the noise.
    CHECK(channel.noise_rms == Approx(kNoise).epsilon(0.1));
  }
  // Five deviations of a line's noise, and what folds back from the sampling rate (see above).
  constexpr double kFloor = 5.0 * 0.011 * 2.0 / 572.0 + 4.0 / (kPi * 82.0) * 2000.0 / kPerCycle * 0.2;
  for (std::size_t c = 0; c < 3; ++c) {
    carrier.samples_are_means = c > 0;
    const auto groups = carrier_groups(waveform, c, carrier, settings);
    INFO(waveform.channels[c].name);
    REQUIRE(groups);
    REQUIRE(groups->groups.size() == 5);
    // Three levels have groups at even multiples only.
    compare_groups(*groups, c == 2 ? three_table : two_table, kFloor, c == 2 ? 10 : 20);
  }
}

}  // namespace
}  // namespace loadstair::waveform
