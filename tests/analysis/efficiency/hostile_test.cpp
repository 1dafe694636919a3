// Whatever a bench or a file gives, no figure is handed on that is not a number: it is refused, with a
// reason.
#include <catch2/catch.hpp>
#include <cmath>
#include <limits>
#include <string>
#include <vector>

#include "analysis/efficiency/efficiency.h"

using namespace loadstair;
using efficiency::CurvePoint;
using efficiency::LossCurve;
using efficiency::Quoted;
using estimate::Estimate;

namespace {

constexpr double kNan = std::numeric_limits<double>::quiet_NaN();
constexpr double kInfinity = std::numeric_limits<double>::infinity();
const std::vector<double> kHostile = {0, -1, 1, 300, -300, 1e-300, 1e300, kNan, kInfinity, -kInfinity};

Estimate with(double value, double u) {
  static int count = 0;
  const std::string key = "source " + std::to_string(++count);
  return Estimate{value, estimate::make_type_b(key, key, estimate::Distribution::normal), u};
}

/// Values and uncertainties of all kinds.
std::vector<Estimate> hostile_estimates() {
  std::vector<Estimate> out;
  for (const double value : kHostile) {
    for (const double u : {0.0, 1.0, 1e300, kNan, kInfinity}) out.push_back(with(value, u));
  }
  return out;
}

bool finite(const Estimate& of) {
  return std::isfinite(of.value()) && std::isfinite(of.variance());
}

/// A finite number, or a reason.
void check(const Quoted& quoted) {
  if (quoted) {
    CHECK(finite(*quoted));
  } else {
    CHECK_FALSE(quoted.refusal().reason.empty());
  }
}

CurvePoint point(const Estimate& input, const Estimate& output, const std::string& label = "level") {
  CurvePoint out;
  out.label = label;
  out.input_power = input;
  out.output_power = output;
  out.loss = input - output;
  out.efficiency = output.value() != 0 && input.value() != 0 ? output / input : Estimate{};
  return out;
}

/// Five good levels, of which one is replaced.
std::vector<CurvePoint> levels_with(const Estimate& input, const Estimate& output, std::size_t at) {
  std::vector<CurvePoint> out;
  const std::vector<double> powers = {60, 120, 300, 450, 600};
  for (std::size_t i = 0; i < powers.size(); ++i) {
    const double p = powers[i];
    const std::string label = "level " + std::to_string(i);
    const Estimate good = with(p + 2.4 + p * (0.008 + p * 3e-5), 0.05);
    out.push_back(i == at ? point(input, output, label) : point(good, Estimate{p}, label));
  }
  return out;
}

void check_weighted(const efficiency::Weighted& weighted) {
  check(weighted.efficiency);
  for (const auto& use : weighted.uses) {
    CHECK(finite(use.efficiency));
    CHECK(finite(use.shift));
  }
}

void check_model(const efficiency::LossModel& model) {
  for (const Estimate* one : {&model.p0, &model.p1, &model.p2}) CHECK(std::isfinite(one->value()));
  CHECK(std::isfinite(model.chi_squared));
  check(model.peak_power());
  const auto peak = efficiency::peak_of(model, 1000);
  if (!peak) {
    CHECK_FALSE(peak.refusal().reason.empty());
    return;
  }
  for (const auto* one : {&peak->power_interval, &peak->efficiency_interval}) {
    CHECK(std::isfinite(one->value));
    CHECK(std::isfinite(one->low));
    CHECK(std::isfinite(one->high));
  }
}

/// Everything that a curve is asked for.
void check_curve(const std::vector<CurvePoint>& points) {
  for (const double floor_w : {0.001, 0.0, -1.0, kNan, kInfinity}) {
    if (const auto model = efficiency::fit_loss_model(points, floor_w)) {
      CHECK(floor_w == 0.001);
      check_model(*model);
    } else {
      CHECK_FALSE(model.refusal().reason.empty());
    }
  }
  const auto pieces = efficiency::fit_loss_models(points, 0.001);
  for (const auto& piece : pieces) CHECK(piece.model.has_value() == piece.why.empty());
  for (const auto& of : {std::vector<efficiency::LossPiece>{}, pieces}) {
    const LossCurve curve{"1", points, of};
    for (const double power : {0.0, -1.0, 60.0, 200.0, 600.0, 700.0, kNan, kInfinity}) {
      for (const auto basis : {efficiency::Basis::output_power, efficiency::Basis::input_power}) {
        if (const auto there = efficiency::loss_there(curve, power, basis)) {
          CHECK(finite(there->loss));
          CHECK(std::isfinite(there->slope));
        } else {
          CHECK_FALSE(there.refusal().reason.empty());
        }
      }
    }
    for (const auto scheme : {efficiency::Scheme::european, efficiency::Scheme::cec}) {
      for (const double rated_w : {600.0, 1.0, 0.0, -600.0, 1e300, kNan, kInfinity}) {
        for (const double within : {0.02, 0.0, 1.0, -1.0, kNan})
          check_weighted(efficiency::weighted_efficiency(scheme, rated_w, curve, "385 V", within));
      }
    }
  }
}

}  // namespace

TEST_CASE("a level of any numbers: fits, peaks, places between and weighted figures refuse or are finite") {
  for (const double u : {0.0, 0.05, 1e300, kNan}) {
    for (const double input : kHostile) {
      for (const double output : kHostile) {
        INFO("input " << input << " output " << output << " u " << u);
        check_curve(levels_with(with(input, u), with(output, u / 2), 2));
      }
    }
  }
}

TEST_CASE("levels of one power, one level, and none") {
  std::vector<CurvePoint> equal;
  for (int i = 0; i < 5; ++i) equal.push_back(point(Estimate{310.0 + i}, Estimate{300}, std::to_string(i)));
  check_curve(equal);
  CHECK_FALSE(efficiency::fit_loss_model(equal, 0.001));
  check_curve({equal.front()});
  check_curve({});
  for (const double power : kHostile)
    check_curve({point(Estimate{power}, Estimate{power}, "a"), point(Estimate{power}, Estimate{power}, "b")});
  const std::vector<CurvePoint> zero = {point(Estimate{0}, Estimate{0})};
  CHECK_FALSE(efficiency::weighted_efficiency(efficiency::Scheme::cec, 600, zero, nullptr).efficiency);
}

TEST_CASE("CEC over voltages refuses a figure that is no number") {
  for (const double value : {kNan, kInfinity}) {
    std::vector<efficiency::Weighted> three(3);
    for (auto& one : three) one.efficiency = Estimate{0.95};
    CHECK(efficiency::cec_over_voltages(three).efficiency);
    three[1].efficiency = Estimate{value};
    CHECK_FALSE(efficiency::cec_over_voltages(three).efficiency);
  }
}

TEST_CASE("a port's power from any readings is finite or refused") {
  for (const auto current : {efficiency::Current::dc, efficiency::Current::ac}) {
    for (const auto role : {efficiency::Role::input, efficiency::Role::output}) {
      for (const Estimate& voltage : hostile_estimates()) {
        for (const Estimate& other :
             {Estimate{2}, Estimate{0}, Estimate{-2}, Estimate{kNan}, Estimate{1e300}, with(1, kInfinity)}) {
          efficiency::Port port;
          port.name = "port";
          port.current = current;
          port.role = role;
          port.lead = efficiency::Resistance{"lead", 0.01, kNan};
          port.voltmeter_impedance = efficiency::Resistance{"V", 1e6, 0.1};
          efficiency::PortReading reading;
          reading.voltage = voltage;
          reading.current = other;
          if (current == efficiency::Current::ac) reading.power_factor = other;
          for (const bool two_ways : {false, true}) {
            if (two_ways) reading.power = voltage;
            reading.ripple_power = other;
            reading.product_less_power = other;
            const auto found = efficiency::port_power(port, reading);
            for (const Quoted* one : {&found.active_power, &found.apparent_power, &found.power_factor,
                                      &found.voltage, &found.current})
              check(*one);
            if (found.correction) CHECK(finite(*found.correction));
            for (const auto& one : found.cross_checks) CHECK(finite(one.difference));
          }
        }
      }
    }
  }
}

TEST_CASE("a step of any powers has finite figures or none") {
  for (const Estimate& in : hostile_estimates()) {
    for (const Estimate& out :
         {Estimate{290}, Estimate{0}, Estimate{kNan}, with(1, kInfinity), Estimate{1e300}}) {
      efficiency::StepInput input;
      input.label = "step";
      input.ports.resize(2);
      input.ports[1].role = efficiency::Role::output;
      input.readings.resize(2);
      input.readings[0].power = in;
      input.readings[1].power = out;
      input.noise = efficiency::StepNoise{in, out, in, out};
      const auto found = efficiency::step_result(input);
      for (const Quoted* one : {&found.input_power, &found.output_power, &found.loss, &found.efficiency})
        check(*one);
      for (const CurvePoint& one : efficiency::curve(std::vector<efficiency::StepResult>{found}))
        CHECK(efficiency::is_finite(one));
    }
  }
}

TEST_CASE("a series with a number that is none has no noise") {
  const std::vector<double> time = {0, 1, 2, 3};
  for (const double bad : {kNan, kInfinity}) {
    const std::vector<double> power = {1, 2, bad, 3};
    const std::vector<efficiency::PortSeries> ports = {{efficiency::Role::input, true, power}};
    CHECK_FALSE(efficiency::step_noise(time, ports, {"1", "step"}));
  }
  CHECK_FALSE(efficiency::step_noise({}, {}, {"1", "step"}));
}

TEST_CASE("declared numbers that are none: ripple, form factor, leads, trips, buses") {
  for (const double a : kHostile) {
    for (const double b : kHostile) {
      INFO(a << ", " << b);
      for (const auto role : {efficiency::Role::input, efficiency::Role::output}) {
        efficiency::Port port;
        port.role = role;
        check(efficiency::ripple_bound(port, a, b, "1"));
      }
      CHECK(std::isfinite(efficiency::lead_effect(a, b).power_w));
      CHECK(std::isfinite(efficiency::lead_effect(a, b).relative));
      for (const Estimate& x : {Estimate{a}, with(a, 1), with(a, kNan)}) {
        check(efficiency::rms_from_average_responding(x, Estimate{b}));
        for (const auto sense :
             {efficiency::Sense::peak, efficiency::Sense::rms, efficiency::Sense::average}) {
          check(efficiency::trip_current(x, Estimate{b}, sense));
          check(efficiency::trip_current(Estimate{0.5}, Estimate{0.1}, sense, {x, Estimate{b}}));
        }
      }
    }
    const auto bus = efficiency::least_dc_bus_v(a);
    CHECK((!bus || std::isfinite(*bus)));
  }
  CHECK_FALSE(efficiency::ripple_bound({}, -1, 1, "1"));
  CHECK_FALSE(efficiency::trip_current(Estimate{kNan}, Estimate{0.1}, efficiency::Sense::rms));
}
