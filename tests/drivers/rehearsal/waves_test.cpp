#include <catch2/catch.hpp>
#include <cmath>
#include <numbers>
#include <numeric>
#include <sstream>

#include "analysis/base/number.h"
#include "drivers/rehearsal/scope.h"

namespace loadstair::rehearsal {
namespace {

struct Bench {
  PlantParameters parameters;
  PlantSettings settings;
  History history{0.02, 20.0};
  PlantStep last;

  void run(PortBurden burden = {}) {
    Plant plant{parameters};
    plant.settings = settings;
    plant.output_burden = burden;
    for (int i = 0; i < 200; ++i) history.push(plant.step());
    last = plant.last();
  }
};

Bench distorted() {
  Bench bench;
  PlantParameters& p = bench.parameters;
  p.converter.output.harmonics = {{2, 0.01, 40.0}, {3, 0.03, 180.0}, {5, 0.02, 20.0}};
  p.converter.output.dc_offset_v = 1.5;
  p.converter.output.residue_share = 0.02;
  p.load.displacement_deg = 30.0;
  p.load.harmonics = {{3, 0.4, 150.0}, {7, 0.1, 10.0}};
  p.converter.overload.sense_ohm = 0.0;
  p.source.resistance_ohm = 2.0;
  p.converter.input.ripple_share = 0.3;
  bench.settings.source_on = true;
  bench.settings.load_on = true;
  bench.settings.load_power_w = 400.0;
  return bench;
}

double mean_product(const std::vector<double>& a, const std::vector<double>& b) {
  return std::inner_product(a.begin(), a.end(), b.begin(), 0.0) / static_cast<double>(a.size());
}

TEST_CASE("means of the drawn waveforms equal the means of the phasors", "[rehearsal]") {
  Bench bench = distorted();
  bench.run();
  // Ten whole cycles; sampled evenly, the mean of a band-limited periodic signal is exact (closed form).
  constexpr std::size_t kCount = 200000;
  const auto wave = [&](ScopeSignal signal) {
    return draw_wave(bench.history, bench.parameters, signal, 3.0, 1e-6, kCount);
  };
  const auto v = wave(ScopeSignal::output_voltage);
  const auto i = wave(ScopeSignal::output_current);
  const StepMeans means = bench.history.means(3.0, 3.2);
  const PortStep& out = means.output;
  // The load's constant-power regulation is settled to 1e-9 by then.
  CHECK(mean_product(v, v) == Approx(out.voltage[0].mean_square).epsilon(1e-8));
  CHECK(mean_product(i, i) == Approx(out.current.mean_square).epsilon(1e-8));
  CHECK(mean_product(v, i) == Approx(out.power_w).epsilon(1e-8));
  const double v_mean = std::accumulate(v.begin(), v.end(), 0.0) / kCount;
  CHECK(v_mean == Approx(out.voltage[0].mean).epsilon(1e-6));

  const auto vin = wave(ScopeSignal::input_voltage);
  const auto iin = wave(ScopeSignal::input_current);
  CHECK(mean_product(vin, iin) == Approx(means.input.power_w).epsilon(1e-7));
  CHECK(mean_product(iin, iin) == Approx(means.input.current.mean_square).epsilon(1e-7));
  // Ripple behind a source resistance: the product of the means is above the power.
  CHECK(bench.last.input.voltage[0].mean * bench.last.input.current.mean > bench.last.input.power_w);
}

TEST_CASE("rectified means and the sensed peak are those of the drawn waveform", "[rehearsal]") {
  Bench bench = distorted();
  bench.parameters.converter.output.residue_share = 0.0;
  bench.parameters.converter.output.dc_offset_v = 0.0;
  bench.run();
  const auto mean_of_magnitudes = [&](ScopeSignal signal) {
    const auto samples = draw_wave(bench.history, bench.parameters, signal, 3.0, 1e-6, 20000);
    double sum = 0.0;
    for (const double sample : samples) sum += std::abs(sample);
    return sum / 20000.0;
  };
  // 720 points against 20000: the corners at the zeros cost up to (pi / 720)^2 / 3 times a few.
  CHECK(bench.last.output.voltage[0].mean_rectified ==
        Approx(mean_of_magnitudes(ScopeSignal::output_voltage)).epsilon(1e-4));
  CHECK(bench.last.output.current.mean_rectified ==
        Approx(mean_of_magnitudes(ScopeSignal::output_current)).epsilon(1e-4));

  // Overload by the peak: folded back, the peak of the current is the trip.
  Bench over = distorted();
  over.parameters.converter.output.residue_share = 0.0;
  over.parameters.converter.output.dc_offset_v = 0.0;
  over.parameters.converter.output.harmonics = {{3, 0.03, 180.0}, {5, 0.02, 20.0}};
  over.parameters.converter.overload = {0.25, 0.1, SenseKind::peak, 0.0};
  over.settings.load_mode = LoadMode::resistance;
  over.settings.load_resistance_ohm = 60.0;
  over.run();
  REQUIRE(over.last.folded_back);
  double peak = 0.0;
  for (const double sample :
       draw_wave(over.history, over.parameters, ScopeSignal::output_current, 3.0, 1e-6, 20000))
    peak = std::max(peak, std::abs(sample));
  CHECK(peak == Approx(2.5).epsilon(2e-4));
}

TEST_CASE("a voltmeter left across a light output changes what is measured, by Ohm's law", "[rehearsal]") {
  // 40 W at 230 V into a resistor, with a 20 kohm voltmeter: it takes 230^2 / 20000 = 2.6 W by itself.
  Bench bench;
  bench.parameters.converter.output.impedance_ohm = 0.0;
  bench.parameters.converter.output.harmonics.clear();
  bench.parameters.converter.output.dc_offset_v = 0.0;
  bench.parameters.converter.output.residue_share = 0.0;
  bench.settings.source_on = true;
  bench.settings.load_on = true;
  bench.settings.load_mode = LoadMode::resistance;
  bench.settings.load_resistance_ohm = 230.0 * 230.0 / 40.0;
  bench.run({0.5, 0.0, 1.0 / 20000.0, 0.0});
  const double through_a = 230.0 / (0.5 + 1322.5);
  CHECK(bench.last.output.power_w == Approx(230.0 * (through_a + 230.0 / 20000.0)).epsilon(1e-12));
  CHECK(std::sqrt(bench.last.output.meter_current.mean_square) == Approx(through_a).epsilon(1e-12));
  // On the load's side of the ammeter the same voltmeter's current is in the ammeter too.
  bench.run({0.5, 0.0, 0.0, 1.0 / 20000.0});
  const double parallel = 1.0 / (1.0 / 1322.5 + 1.0 / 20000.0);
  CHECK(std::sqrt(bench.last.output.meter_current.mean_square) ==
        Approx(230.0 / (0.5 + parallel)).epsilon(1e-12));
}

TEST_CASE("a capture is a CSV of quantised samples with the scope's errors inside their bounds",
          "[rehearsal]") {
  Bench bench;
  bench.settings.source_on = true;
  bench.settings.load_on = true;
  bench.settings.load_power_w = 300.0;
  bench.run();
  ScopeDescription scope;
  scope.bits = 8;
  scope.length_s = 0.2;
  scope.channels = {{}, {"I_out", "A", ScopeSignal::output_current, 10.0, 1.0, 0.5, 0.05, 1e-6}};
  const std::string text = capture_csv(bench.history, bench.parameters, scope, 3.0, 9, 1);
  std::istringstream in{text};
  std::string line;
  std::getline(in, line);
  CHECK(line == "Time,V_out,I_out");
  std::getline(in, line);
  CHECK(line == "(s),(V),(A)");
  std::size_t rows = 0;
  double square = 0.0;
  while (std::getline(in, line)) {
    const std::size_t first = line.find(',');
    const std::size_t second = line.find(',', first + 1);
    REQUIRE(second != std::string::npos);
    const auto t = base::parse_number(line.substr(0, first));
    const auto v = base::parse_number(line.substr(first + 1, second - first - 1));
    REQUIRE((t && v));
    CHECK(*t == Approx(static_cast<double>(rows) * 1e-5).margin(1e-12));
    const double code = *v / (800.0 / 256.0);
    CHECK(code == Approx(std::round(code)).margin(1e-3));
    square += *v * *v;
    ++rows;
  }
  CHECK(rows == 20000);
  const double rms = std::sqrt(square / static_cast<double>(rows));
  const double true_rms = std::sqrt(bench.last.output.voltage[0].mean_square);
  // 1 % of reading, 0.5 % of 400 V; the quantisation adds (3.125 V)^2 / 12 to the square.
  CHECK(std::abs(rms - true_rms) < 0.01 * true_rms + 2.0 + 0.1);
  CHECK(capture_csv(bench.history, bench.parameters, scope, 3.0, 9, 1) == text);
  CHECK(capture_csv(bench.history, bench.parameters, scope, 3.0, 9, 2) != text);
}

TEST_CASE("truth over any window is the mean of its steps, shares of steps counted", "[rehearsal]") {
  History history{0.02, 0.1};
  for (int i = 0; i < 500; ++i) {
    PlantStep step;
    step.input.power_w = i < 250 ? 100.0 : 200.0;
    step.output.power_w = i < 250 ? 95.0 : 192.0;
    step.case_c = 0.1 * i;
    history.push(step);
  }
  CHECK(history.truth(1.0, 2.0).input_power_w == Approx(100.0).epsilon(1e-12));
  CHECK(history.truth(4.0, 6.0).input_power_w == Approx(150.0).epsilon(1e-12));
  CHECK(history.truth(4.0, 6.0).efficiency == Approx(287.0 / 300.0).epsilon(1e-12));
  CHECK(history.truth(4.99, 5.01).output_power_w == Approx(143.5).epsilon(1e-9));
  CHECK(history.truth(7.0, 9.0).case_c == Approx(44.9).margin(0.1));
  // Beyond the ring the steps themselves are gone, the truth is not.
  CHECK(history.means(0.0, 10.0).input.power_w == Approx(200.0).epsilon(1e-12));
}

}  // namespace
}  // namespace loadstair::rehearsal
