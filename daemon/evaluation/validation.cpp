#include "daemon/evaluation/validation.h"

#include <algorithm>
#include <cmath>
#include <span>
#include <string>
#include <utility>
#include <vector>

#include "analysis/base/number.h"
#include "analysis/estimate/monte_carlo.h"

namespace loadstair::evaluation {
namespace {

using estimate::Estimate;

constexpr std::size_t kDrawsOfRun = 4'000'000;
constexpr std::size_t kLeastOfStep = 100'000;
constexpr std::size_t kMostOfStep = 300'000;
/// Numerical error of the ends over the tolerance: JCGM 101 8.2's fifth, else coarser.
constexpr double kFine = 0.2;
constexpr double kCoarser[] = {0.3, 0.5};
constexpr double kSameFormula = 1e-9;
constexpr std::size_t kNone = static_cast<std::size_t>(-1);

/// The inputs of the formula at one draw.
using Draw = std::span<const double>;

/// One port's power as a formula over the inputs, by their places; kNone for what does not enter.
struct PortFormula {
  bool counted = true, output = false, dc = true;
  std::size_t voltage = kNone, current = kNone, power = kNone, factor = kNone, ripple = kNone;
  std::size_t shunt_ohm = kNone;               ///< across the port
  std::size_t series_ohm[2] = {kNone, kNone};  ///< in its way: ammeter, leads
};

/// What corrections move on the way to the terminals.
struct Moving {
  double voltage = 0.0, current = 0.0, power = 0.0;
};

/// |x - s f y|: from mean squares on AC, where the power tells how x and y go together.
double moved(double x, double y, double factor, double power, double sign, bool dc) {
  if (dc) return x - sign * factor * y;
  const double squared = x * x - 2.0 * sign * factor * power + factor * factor * y * y;
  return squared > 0.0 ? std::sqrt(squared) : x;
}

double power_of(const PortFormula& port, Draw draw) {
  Moving at;
  if (port.voltage != kNone) at.voltage = draw[port.voltage];
  if (port.current != kNone) at.current = draw[port.current];
  if (port.power != kNone) {
    at.power = draw[port.power];
  } else {
    at.power = at.voltage * at.current * (port.factor == kNone ? 1.0 : draw[port.factor]);
    if (port.ripple != kNone) at.power += draw[port.ripple];
  }
  const double sign = port.output ? -1.0 : 1.0;
  if (port.shunt_ohm != kNone) {
    const double siemens = 1.0 / draw[port.shunt_ohm];
    const double change = -sign * siemens * at.voltage * at.voltage;
    if (port.current != kNone) at.current = moved(at.current, at.voltage, siemens, at.power, sign, port.dc);
    at.power += change;
  }
  for (const std::size_t place : port.series_ohm) {
    if (place == kNone) continue;
    const double ohm = draw[place];
    const double change = -sign * ohm * at.current * at.current;
    if (port.voltage != kNone) at.voltage = moved(at.voltage, at.current, ohm, at.power, sign, port.dc);
    at.power += change;
  }
  return at.power;
}

class Formula {
 public:
  /// Refuses (false) where a port's power is not made in a way that is known here.
  bool add(const efficiency::Port& port, const efficiency::PortReading& reading,
           const efficiency::PortPower& found) {
    PortFormula formula;
    formula.output = port.role == efficiency::Role::output || port.role == efficiency::Role::auxiliary_output;
    const bool auxiliary =
        port.role == efficiency::Role::auxiliary_input || port.role == efficiency::Role::auxiliary_output;
    formula.counted = !auxiliary || port.counted;
    if (!formula.counted) return true;
    formula.dc = port.current == efficiency::Current::dc;
    formula.voltage = place(reading.voltage);
    formula.current = place(reading.current);
    if (found.method == "wattmeter") {
      formula.power = place(reading.power);
    } else if (found.method == "capture") {
      formula.power = place(reading.capture_power);
    } else if (found.method == "V x I x PF") {
      formula.factor = place(reading.power_factor);
    } else if (found.method == "V x I") {
      if (reading.ripple_power) formula.ripple = place(*reading.ripple_power);
    } else {
      return false;
    }
    place_corrections(port, formula);
    ports_.push_back(formula);
    return true;
  }

  void add_noise(const Estimate& noise) { noise_ = place(noise); }

  [[nodiscard]] double operator()(Draw draw) const {
    double in = 0.0;
    double out = 0.0;
    for (const PortFormula& port : ports_) (port.output ? out : in) += power_of(port, draw);
    return out / in + (noise_ == kNone ? 0.0 : draw[noise_]);
  }

  [[nodiscard]] const std::vector<Estimate>& inputs() const { return inputs_; }

 private:
  std::size_t place(const Estimate& input) {
    inputs_.push_back(input);
    return inputs_.size() - 1;
  }
  std::size_t place(const std::optional<estimate::Quoted>& quoted) {
    return quoted && quoted->ok() ? place(**quoted) : kNone;
  }
  std::size_t place(const std::optional<efficiency::Resistance>& resistance) {
    if (!resistance || !std::isfinite(resistance->ohm) || !(resistance->ohm > 0.0)) return kNone;
    return place(efficiency::resistance_estimate(*resistance));
  }

  void place_corrections(const efficiency::Port& port, PortFormula& formula) {
    const bool at_terminals = port.sensing == efficiency::Sensing::at_terminals;
    const bool converter_side = port.voltmeter == efficiency::VoltmeterPosition::converter_side;
    if (at_terminals || converter_side) {
      if (formula.voltage != kNone) formula.shunt_ohm = place(port.voltmeter_impedance);
    } else if (formula.current != kNone) {
      formula.series_ohm[0] = place(port.ammeter);
    }
    if (!at_terminals && formula.current != kNone) formula.series_ohm[1] = place(port.lead);
  }

  std::vector<PortFormula> ports_;
  std::vector<Estimate> inputs_;
  std::size_t noise_ = kNone;
};

enum class Verdict { agrees, differs, open };

/// How the two intervals compare, given that Monte Carlo's ends are known within a share of the tolerance.
Verdict verdict_of(const estimate::Validation& found, const estimate::MonteCarlo& drawn, double share) {
  if (!drawn.stabilised) return Verdict::open;
  if (share <= kFine) return found.agrees ? Verdict::agrees : Verdict::differs;
  const double most = std::max(found.low_difference, found.high_difference);
  if (most <= (1.0 - share) * found.tolerance) return Verdict::agrees;
  return most > (1.0 + share) * found.tolerance ? Verdict::differs : Verdict::open;
}

std::string text_of(const estimate::Validation& found, const estimate::MonteCarlo& drawn, Verdict verdict) {
  const std::string draws = base::print_integer(static_cast<std::int64_t>(drawn.draws)) + " draws";
  if (verdict == Verdict::open)
    return "Monte Carlo: cannot tell after " + draws + ", so the linear interval stands unvalidated";
  const double most = std::max(found.low_difference, found.high_difference) * 100.0;
  const std::string ends = "its ends differ by up to " + base::print_significant(most, 2) + " points, " +
                           base::print_significant(found.tolerance * 100.0, 1) + " are allowed";
  if (verdict == Verdict::agrees) return "Monte Carlo, " + draws + ": bears the linear interval out; " + ends;
  return "Monte Carlo, " + draws + ": the linear interval is not valid; " + ends +
         "; the interval is Monte Carlo's, without k";
}

/// Monte Carlo's interval; the value stays the ratio of the powers, which a reader may compute again.
Quantity quantity_of(const estimate::Coverage& coverage, double value) {
  Quantity quantity;
  quantity.known = true;
  quantity.value = value;
  quantity.unit = "1";
  quantity.low = coverage.low;
  quantity.high = coverage.high;
  quantity.level = coverage.level;
  quantity.method = "monte-carlo";
  return quantity;
}

}  // namespace

std::size_t most_draws_of(std::size_t steps) {
  return std::clamp(kDrawsOfRun / std::max<std::size_t>(steps, 1), kLeastOfStep, kMostOfStep);
}

std::optional<Validated> validated_efficiency(const efficiency::StepInput& input,
                                              const efficiency::StepResult& linear, std::uint64_t seed,
                                              std::size_t most_draws) {
  if (!linear.efficiency || !(linear.efficiency->variance() > 0.0)) return std::nullopt;
  Formula formula;
  for (std::size_t i = 0; i < input.ports.size(); ++i) {
    if (!formula.add(input.ports[i], input.readings[i], linear.ports[i])) return std::nullopt;
  }
  if (input.noise) formula.add_noise(input.noise->efficiency);
  std::vector<double> centre;
  for (const Estimate& one : formula.inputs()) centre.push_back(one.value());
  const double value = linear.efficiency->value();
  if (std::abs(formula(centre) - value) > kSameFormula * std::abs(value)) return std::nullopt;

  std::vector<double> draw(centre.size());
  const estimate::BlockModel model = [&](std::span<const std::span<const double>> inputs,
                                         std::span<double> result) {
    for (std::size_t j = 0; j < result.size(); ++j) {
      for (std::size_t i = 0; i < inputs.size(); ++i) draw[i] = inputs[i][j];
      result[j] = formula(draw);
    }
  };
  estimate::AdaptiveSettings settings{.seed = seed == 0 ? estimate::kMonteCarloSeed : seed,
                                      .tolerance_share = kFine,
                                      .most_draws = most_draws};
  auto drawn = estimate::propagate_blocks_adaptively(model, formula.inputs(), settings);
  for (const double share : kCoarser) {
    if (!drawn || drawn->stabilised) break;
    settings.tolerance_share = share;
    drawn = estimate::propagate_blocks_adaptively(model, formula.inputs(), settings);
  }
  if (!drawn) return std::nullopt;
  const estimate::Coverage coverage = estimate::coverage(*linear.efficiency);
  estimate::Validation found = estimate::validate(coverage, *drawn);
  const Verdict verdict = verdict_of(found, *drawn, settings.tolerance_share);
  found.agrees = verdict == Verdict::agrees;
  Validated out;
  out.validation = {found.agrees,          drawn->draws,    found.low_difference,
                    found.high_difference, found.tolerance, text_of(found, *drawn, verdict)};
  if (verdict == Verdict::differs)
    out.instead = quantity_of(estimate::reported(coverage, *drawn, found), value);
  return out;
}

}  // namespace loadstair::evaluation
