#include "drivers/rehearsal/two_nodes.h"

#include <catch2/catch.hpp>
#include <cmath>

#include "drivers/rehearsal/lamps.h"

namespace loadstair::rehearsal {
namespace {

TEST_CASE("two nodes follow the differential equations", "[rehearsal]") {
  const ThermalParameters p{0.6, 1.8, 0.9, 40.0, 600.0, 1e6, 1e6, 0.0};
  TwoNodes nodes{p, 25.0};
  // A slow second way: Runge and Kutta's fourth order in small steps.
  double junction = 25.0;
  double heatsink = 25.0;
  const double junction_j_per_k = 40.0 / 0.6;
  const double case_j_per_k = 600.0 / 1.8;
  const double heat = 22.0;
  const auto slope = [&](double j, double c, double& dj, double& dc) {
    dj = (heat - (j - c) / 0.6) / junction_j_per_k;
    dc = ((j - c) / 0.6 - (c - 25.0) / 1.8) / case_j_per_k;
  };
  for (int i = 0; i < 200; ++i) {
    nodes.advance(2.0, heat, 25.0);
    for (int k = 0; k < 20; ++k) {
      const double h = 0.1;
      double j1, c1, j2, c2, j3, c3, j4, c4;
      slope(junction, heatsink, j1, c1);
      slope(junction + 0.5 * h * j1, heatsink + 0.5 * h * c1, j2, c2);
      slope(junction + 0.5 * h * j2, heatsink + 0.5 * h * c2, j3, c3);
      slope(junction + h * j3, heatsink + h * c3, j4, c4);
      junction += h / 6.0 * (j1 + 2 * j2 + 2 * j3 + j4);
      heatsink += h / 6.0 * (c1 + 2 * c2 + 2 * c3 + c4);
    }
  }
  CHECK(nodes.state().junction_c == Approx(junction).epsilon(1e-9));
  CHECK(nodes.state().case_c == Approx(heatsink).epsilon(1e-9));

  // Far from the start only the slow constant is left: each further constant shrinks the rest by e.
  const auto [fast, slow] = nodes.time_constants_s();
  CHECK(fast < 40.0);
  CHECK(slow > 600.0);
  CHECK(fast * slow == Approx(40.0 * 600.0).epsilon(1e-12));  // determinant of the rate matrix
  const ThermalState end = nodes.steady(heat, 25.0);
  nodes.advance(10.0 * fast, heat, 25.0);
  const double before = end.case_c - nodes.state().case_c;
  nodes.advance(slow, heat, 25.0);
  CHECK((end.case_c - nodes.state().case_c) / before == Approx(std::exp(-1.0)).epsilon(1e-6));
}

TEST_CASE("the fan starts, lowers the resistance, and stops with hysteresis", "[rehearsal]") {
  const ThermalParameters p{0.6, 1.8, 0.9, 1.0, 10.0, 60.0, 50.0, 0.0};
  TwoNodes nodes{p, 25.0};
  double highest = 0.0;
  for (int i = 0; i < 20000; ++i) {
    nodes.advance(0.02, 30.0, 25.0);  // fan standing it would end at 25 + 54 = 79 degC
    highest = std::max(highest, nodes.state().case_c);
  }
  CHECK(nodes.fan_on());
  CHECK(highest == Approx(60.0).margin(0.3));
  CHECK(nodes.state().case_c == Approx(25.0 + 27.0).epsilon(1e-9));
  for (int i = 0; i < 20000; ++i) nodes.advance(0.02, 10.0, 25.0);
  CHECK_FALSE(nodes.fan_on());
  CHECK(nodes.state().case_c == Approx(25.0 + 18.0).epsilon(1e-9));
}

TEST_CASE("lamps draw twelve times their current when cold, and their rated power when hot", "[rehearsal]") {
  LampParameters p;
  p.count = 3;
  p.rated_power_w = 100.0;
  p.rated_voltage_v = 230.0;
  LampBank bank{p, 24.0};
  const double hot = 100.0 / (230.0 * 230.0);
  // Cold resistance about a twelfth of the hot one: common practice, no source.
  CHECK(bank.conductance_s(3) == Approx(3.0 * 12.0 * hot).epsilon(1e-9));
  CHECK(bank.conductance_s(0) == 0.0);
  for (int i = 0; i < 200; ++i) bank.advance(0.02, 230.0, 2);
  CHECK(bank.conductance_s(2) == Approx(2.0 * hot).epsilon(1e-6));
  CHECK(bank.filament_k(0) == Approx(2800.0).epsilon(1e-6));
  CHECK(bank.filament_k(2) == Approx(297.15));
  // At less voltage it is cooler, and draws more than a resistor of its hot resistance would.
  for (int i = 0; i < 400; ++i) bank.advance(0.02, 115.0, 2);
  CHECK(bank.conductance_s(2) > 2.1 * hot);
  CHECK(bank.filament_k(0) < 2300.0);
  for (int i = 0; i < 200000; ++i) bank.advance(0.02, 0.0, 0);
  CHECK(bank.filament_k(0) == Approx(297.15).margin(0.02));
}

TEST_CASE("a filament warms up in about its warm-up time", "[rehearsal]") {
  LampParameters p;
  p.count = 1;
  p.warm_up_s = 0.1;
  LampBank bank{p, 24.0};
  bank.advance(0.02, 230.0, 1);
  CHECK(bank.filament_k(0) > 900.0);  // twelvefold power in the first instants
  CHECK(bank.filament_k(0) < 2400.0);
  bank.advance(0.3, 230.0, 1);
  CHECK(bank.filament_k(0) == Approx(2800.0).epsilon(0.01));
}

}  // namespace
}  // namespace loadstair::rehearsal
