#include "analysis/efficiency/step.h"

#include <algorithm>
#include <cmath>
#include <utility>

#include "analysis/base/number.h"
#include "analysis/base/require.h"
#include "analysis/estimate/coverage.h"

namespace loadstair::efficiency {

namespace {

bool is_input(Role role) {
  return role == Role::input || role == Role::auxiliary_input;
}
bool is_auxiliary(Role role) {
  return role == Role::auxiliary_input || role == Role::auxiliary_output;
}
bool counts(Role role, bool counted) {
  return !is_auxiliary(role) || counted;
}

struct Totals {
  std::vector<double> input;
  std::vector<double> output;
  std::vector<double> loss;
  std::vector<double> efficiency;
};

double mean_of(const std::vector<double>& values) {
  double sum = 0;
  for (const double value : values) sum += value;
  return sum / static_cast<double>(values.size());
}

/// Sums over the counted ports at every instant. The efficiency that is reported is a ratio of means, so its
/// scatter is that of eta + (P_out - eta P_in) / mean P_in (Cochran, Sampling Techniques, 1977, 6.3; from
/// memory). To first order this is the series of efficiencies, and it holds too where bursts bring single
/// inputs down to nothing. It stays empty where the mean input is not above zero: there is no efficiency
/// then.
Totals totals_of(std::span<const double> time_s, std::span<const PortSeries> ports) {
  Totals out;
  out.input.assign(time_s.size(), 0);
  out.output.assign(time_s.size(), 0);
  for (const PortSeries& port : ports) {
    if (!counts(port.role, port.counted)) continue;
    auto& sum = is_input(port.role) ? out.input : out.output;
    for (std::size_t i = 0; i < sum.size(); ++i) sum[i] += port.power_w[i];
  }
  for (std::size_t i = 0; i < time_s.size(); ++i) out.loss.push_back(out.input[i] - out.output[i]);
  if (time_s.empty()) return out;
  const double input = mean_of(out.input);
  const double efficiency = mean_of(out.output) / input;
  if (!(input > 0) || !std::isfinite(efficiency)) return out;
  for (std::size_t i = 0; i < time_s.size(); ++i) {
    out.efficiency.push_back(efficiency + (out.output[i] - efficiency * out.input[i]) / input);
  }
  return out;
}

}  // namespace

base::Outcome<StepNoise> step_noise(std::span<const double> time_s, std::span<const PortSeries> ports,
                                    const estimate::WindowId& id,
                                    const series::SteadyWindowSettings& settings) {
  for (const PortSeries& port : ports) {
    if (port.power_w.size() != time_s.size()) {
      return base::Refusal{id.step, "a port's powers are not of the window's instants"};
    }
  }
  const Totals totals = totals_of(time_s, ports);
  std::vector<series::SteadyWindow> windows;
  for (const auto* quantity : {&totals.input, &totals.output, &totals.loss, &totals.efficiency}) {
    if (quantity == &totals.efficiency && quantity->empty()) continue;
    auto window = series::steady_window({time_s, *quantity}, settings);
    if (!window) return base::Refusal{id.step, window.refusal().text()};
    windows.push_back(*std::move(window));
  }
  auto parts = estimate::type_a_estimates(windows, id);
  if (!parts) return parts.refusal();
  StepNoise out;
  out.input_power = (*parts)[0].with_value(0);
  out.output_power = (*parts)[1].with_value(0);
  out.loss = (*parts)[2].with_value(0);
  if (parts->size() > 3) out.efficiency = (*parts)[3].with_value(0);
  out.count = time_s.size();
  out.effective_count = parts->size() > 3 ? windows[3].effective_count : 0;
  out.too_short = std::any_of(windows.begin(), windows.end(), [](const auto& w) { return w.too_short; });
  return out;
}

namespace {

/// Sum of the counted ports on one side; a refusal when there is none, or one of them has no power.
Quoted sum_of(const StepInput& input, const std::vector<PortPower>& powers, bool inputs) {
  std::optional<Estimate> sum;
  for (std::size_t i = 0; i < powers.size(); ++i) {
    const Port& port = input.ports[i];
    if (is_input(port.role) != inputs || !counts(port.role, port.counted)) continue;
    if (!powers[i].active_power) return powers[i].active_power.refusal();
    sum = sum ? *sum + *powers[i].active_power : *powers[i].active_power;
  }
  if (!sum)
    return base::Refusal{input.label, inputs ? "no input port is declared" : "no output port is declared"};
  return *sum;
}

void add_remarks(const StepInput& input, StepResult& out) {
  for (std::size_t i = 0; i < out.ports.size(); ++i) {
    const PortPower& power = out.ports[i];
    for (const std::string& remark : power.remarks) {
      const bool named = remark.rfind(power.port + ":", 0) == 0;
      out.remarks.push_back(named ? remark : power.port + ": " + remark);
    }
    if (!is_auxiliary(input.ports[i].role)) continue;
    const std::string watts = power.active_power
                                  ? base::print_significant(power.active_power->value(), 4) + " W"
                                  : power.state_text;
    out.remarks.push_back("auxiliary " + power.port + ": " + watts +
                          (input.ports[i].counted ? ", counted" : ", not counted"));
  }
  if (input.noise && input.noise->too_short) {
    out.remarks.push_back(
        "window too short: fewer than 20 readings or 20 correlation times; its spread is taken as a bound");
  }
  if (!out.efficiency) return;
  const estimate::Coverage interval = estimate::coverage(*out.efficiency);
  if (interval.high > 1) {
    out.remarks.push_back(std::string{"the interval of the efficiency passes 100 %: "} +
                          (interval.low > 1
                               ? "and all of it lies beyond; look for a wrong declaration or connection"
                               : "the meters do not resolve the loss"));
  }
}

/// The worst of the counted ports: missing before apparent only before measured.
std::string state_of(const StepInput& input, const std::vector<PortPower>& powers) {
  const PortPower* worst = nullptr;
  for (std::size_t i = 0; i < powers.size(); ++i) {
    if (!counts(input.ports[i].role, input.ports[i].counted)) continue;
    if (worst == nullptr || powers[i].state > worst->state) worst = &powers[i];
  }
  return worst == nullptr ? "no port is declared" : worst->state_text;
}

Quoted power_factor_of(const StepInput& input, const std::vector<PortPower>& powers) {
  for (const Role role : {Role::output, Role::input}) {
    const PortPower* found = nullptr;
    int many = 0;
    for (std::size_t i = 0; i < powers.size(); ++i) {
      if (input.ports[i].role != role || input.ports[i].current != Current::ac) continue;
      found = &powers[i];
      ++many;
    }
    if (many == 1) return found->power_factor;
    if (many > 1) return base::Refusal{input.label, "several AC ports: see each of them"};
  }
  return base::Refusal{input.label, "no AC port"};
}

}  // namespace

StepResult step_result(const StepInput& input) {
  base::require(input.ports.size() == input.readings.size(), "a step has one reading per port");
  StepResult out;
  out.label = input.label;
  for (std::size_t i = 0; i < input.ports.size(); ++i) {
    out.ports.push_back(port_power(input.ports[i], input.readings[i]));
  }
  out.state = state_of(input, out.ports);
  out.power_factor = power_factor_of(input, out.ports);
  const Quoted in = sum_of(input, out.ports, true);
  const Quoted delivered = sum_of(input, out.ports, false);
  const StepNoise noise = input.noise.value_or(StepNoise{});
  out.input_power = in ? Quoted{*in + noise.input_power} : in;
  out.output_power = delivered ? Quoted{*delivered + noise.output_power} : delivered;
  if (!in || !delivered) {
    out.loss = in ? delivered.refusal() : in.refusal();
    out.efficiency = out.loss;
  } else {
    out.loss = *in - *delivered + noise.loss;
    if (in->value() > 0) {
      const Quoted eta = estimate::ratio(*delivered, *in, "efficiency");
      out.efficiency = eta ? Quoted{*eta + noise.efficiency} : eta;
    } else {
      out.efficiency = base::Refusal{input.label, "the input power is not above zero: " +
                                                      base::print_significant(in->value(), 4) + " W"};
    }
  }
  for (Quoted* total : {&out.input_power, &out.output_power, &out.loss, &out.efficiency}) {
    if (*total && !is_finite(**total)) *total = base::Refusal{input.label, "not a finite number"};
  }
  add_remarks(input, out);
  return out;
}

}  // namespace loadstair::efficiency
