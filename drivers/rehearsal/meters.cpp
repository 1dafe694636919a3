#include "drivers/rehearsal/meters.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include "drivers/rehearsal/draws.h"

namespace loadstair::rehearsal {

namespace {

// A free-running meter whose conversions are numbered; a triggered one names them by their instant.
constexpr double kTriggeredTick_s = 1e-9;
// Over this share of full scale the level part of an error turns into another draw.
constexpr double kLevelWidth = 0.04;

double drawn_level(std::uint64_t seed, std::uint64_t run, const std::string& name, std::size_t range,
                   double place) {
  const double bin = std::floor(place / kLevelWidth);
  const double share = place / kLevelWidth - bin;
  const auto draw = [&](double at) {
    return normal_draw(
        key_of(seed, name + " level", {run, range, static_cast<std::uint64_t>(std::llround(at) + 1000)}));
  };
  // Between two draws, still of unit variance.
  return ((1.0 - share) * draw(bin) + share * draw(bin + 1.0)) / std::hypot(1.0 - share, share);
}

/// A rectangular draw inside (-1, 1) with the shares fixed 0.8, run 0.1, level 0.1.
double shared_draw(std::uint64_t seed, std::uint64_t run, const std::string& name, std::size_t range,
                   double place) {
  const double fixed = normal_draw(key_of(seed, name + " fixed", {range}));
  const double of_run = normal_draw(key_of(seed, name + " run", {run, range}));
  const double level = drawn_level(seed, run, name, range, place);
  return normal_to_symmetric(std::sqrt(0.8) * fixed + std::sqrt(0.1) * of_run + std::sqrt(0.1) * level);
}

double responding(Response response, const SignalMeans& signal) {
  switch (response) {
    case Response::dc:
      return signal.mean;
    case Response::true_rms_ac:
      return std::sqrt(std::max(0.0, signal.mean_square - signal.mean * signal.mean));
    case Response::true_rms_ac_dc:
      return std::sqrt(signal.mean_square);
    case Response::average_responding:
      return signal.mean_rectified * std::numbers::pi / (2.0 * std::numbers::sqrt2);
  }
  return 0.0;
}

// IEC 60751:2008, 5.2.
constexpr double kPlatinumA = 3.9083e-3;
constexpr double kPlatinumB = -5.775e-7;
constexpr double kPlatinumC = -4.183e-12;
constexpr double kZeroCelsius_k = 273.15;

double platinum_ohm(double r0_ohm, double t) {
  const double below = t < 0.0 ? kPlatinumC * (t - 100.0) * t * t * t : 0.0;
  return r0_ohm * (1.0 + kPlatinumA * t + kPlatinumB * t * t + below);
}

// The real root of c x^3 + b x + a = 1/T, x = ln R (Cardano; b and c are positive).
double steinhart_hart_ohm(const ResistanceSensor& sensor, double kelvin) {
  if (sensor.c == 0.0) return std::exp((1.0 / kelvin - sensor.a) / sensor.b);
  const double half = 0.5 * (sensor.a - 1.0 / kelvin) / sensor.c;
  const double third = sensor.b / (3.0 * sensor.c);
  const double root = std::sqrt(third * third * third + half * half);
  return std::exp(std::cbrt(root - half) - std::cbrt(root + half));
}

double rounded(double value, double digit) {
  return digit > 0.0 ? std::round(value / digit) * digit : value;
}

}  // namespace

int decimals_of(double digit) {
  if (digit <= 0.0) return 6;
  return std::clamp(static_cast<int>(std::ceil(-std::log10(digit) - 1e-9)), 0, 12);
}

double warming(const Shunt& shunt, double cold_ohm, double mean_square_a2) {
  const double share = 1e-6 * shunt.tempco_ppm_per_k * shunt.rise_k_per_w * cold_ohm * mean_square_a2;
  return 1.0 / (1.0 - std::min(share, 0.9));
}

double resistance_at(const ResistanceSensor& sensor, double celsius) {
  if (sensor.r0_ohm > 0.0) return sensor.lead_ohm + platinum_ohm(sensor.r0_ohm, celsius);
  const double kelvin = celsius + kZeroCelsius_k;
  if (sensor.r25_ohm > 0.0) {
    return sensor.lead_ohm +
           sensor.r25_ohm * std::exp(sensor.beta_k * (1.0 / kelvin - 1.0 / (25.0 + kZeroCelsius_k)));
  }
  return sensor.lead_ohm + steinhart_hart_ohm(sensor, kelvin);
}

Meter::Meter(MeterDescription description, std::uint64_t seed, std::uint64_t run)
    : description_{std::move(description)}, seed_{seed}, run_{run} {
  const double place = symmetric_draw(key_of(seed_, description_.name + " phase", {run_}));
  phase_s_ = 0.5 * (1.0 + place) * description_.update_period_s;
  restore_wiring();
}

void Meter::restore_wiring() {
  wiring_.clear();
  for (const MeterFunction& f : description_.functions)
    wiring_.push_back({f.quantity, f.port, f.node, false});
}

std::optional<std::size_t> Meter::find(const std::string& function) const {
  for (std::size_t i = 0; i < description_.functions.size(); ++i)
    if (description_.functions[i].name == function) return i;
  return std::nullopt;
}

std::int64_t Meter::conversion_at(double time_s) const {
  const double period = description_.update_period_s;
  if (period <= 0.0) return std::llround(time_s / kTriggeredTick_s);
  return static_cast<std::int64_t>(std::floor((time_s - description_.delay_s - phase_s_) / period + 1e-9));
}

double Meter::conversion_end_s(std::int64_t conversion) const {
  const double period = description_.update_period_s;
  if (period <= 0.0) return static_cast<double>(conversion) * kTriggeredTick_s - description_.delay_s;
  return phase_s_ + static_cast<double>(conversion) * period;
}

DrawnError Meter::error(std::size_t function, std::size_t range, double value) const {
  const MeterFunction& f = description_.functions[function];
  if (f.ranges.empty()) return {};
  const MeterRange& r = f.ranges[range];
  const std::string name = description_.name + "/" + f.name;
  const double place = r.full_scale > 0.0 ? value / r.full_scale : 0.0;
  const double offset_bound = 0.01 * r.range_percent * r.full_scale + std::max(0.0, r.digits - 0.5) * r.digit;
  return {0.01 * r.reading_percent * shared_draw(seed_, run_, name + " gain", range, place),
          offset_bound * shared_draw(seed_, run_, name + " offset", range, place)};
}

double Meter::series_ohm(std::size_t function, std::size_t range) const {
  const MeterFunction& f = description_.functions[function];
  const std::string name = description_.name + "/" + f.name + " series";
  if (f.shunt) {
    return f.shunt->resistance_ohm *
           (1.0 + 0.01 * f.shunt->tolerance_percent * symmetric_draw(key_of(seed_, name)));
  }
  if (range >= f.ranges.size()) return 0.0;
  return f.ranges[range].burden_ohm *
         (1.0 + 0.01 * f.burden_tolerance_percent * symmetric_draw(key_of(seed_, name, {range})));
}

double Meter::parallel_siemens(std::size_t function) const {
  const MeterFunction& f = description_.functions[function];
  if (f.impedance_ohm <= 0.0) return 0.0;
  const std::string name = description_.name + "/" + f.name + " parallel";
  return 1.0 /
         (f.impedance_ohm * (1.0 + 0.01 * f.burden_tolerance_percent * symmetric_draw(key_of(seed_, name))));
}

std::optional<std::size_t> Meter::range_for(std::size_t function, double magnitude) const {
  const MeterFunction& f = description_.functions[function];
  if (f.fixed_range >= 0) {
    const auto fixed = static_cast<std::size_t>(f.fixed_range);
    if (fixed < f.ranges.size() && magnitude <= f.ranges[fixed].full_scale) return fixed;
    return std::nullopt;
  }
  for (std::size_t i = 0; i < f.ranges.size(); ++i)
    if (magnitude <= f.ranges[i].full_scale) return i;
  return std::nullopt;
}

double Meter::volts_per_ampere(std::size_t function, const SignalMeans& current) const {
  const MeterFunction& f = description_.functions[function];
  if (!f.shunt) return 1.0;
  const double cold_ohm = series_ohm(function, 0);
  return cold_ohm * warming(*f.shunt, cold_ohm, current.mean_square);
}

double Meter::true_value(std::size_t function, const StepMeans& means) const {
  const MeterFunction& f = description_.functions[function];
  const Wiring& w = wiring_[function];
  const PortStep& port = w.port == Port::input ? means.input : means.output;
  const auto node = static_cast<std::size_t>(w.node);
  switch (w.quantity) {
    case Quantity::voltage:
      return responding(f.response, port.voltage[node]);
    case Quantity::current:
      return responding(f.response, port.meter_current);
    case Quantity::power:
      return port.meter_power_w[node];
    case Quantity::power_factor: {
      const double apparent =
          std::sqrt(port.voltage[node].mean_square) * std::sqrt(port.meter_current.mean_square);
      return apparent > 0.0 ? port.meter_power_w[node] / apparent : 0.0;
    }
    case Quantity::frequency:
      return w.port == Port::output ? means.frequency_hz : 0.0;
    case Quantity::case_temperature:
      return means.case_c;
    case Quantity::junction_temperature:
      return means.junction_c;
    case Quantity::ambient_temperature:
      return means.ambient_c;
  }
  return 0.0;
}

double Meter::sensor_ohm(std::size_t function, double celsius) const {
  const MeterFunction& f = description_.functions[function];
  const double most_k = f.sensor->tolerance_k + f.sensor->tolerance_per_k * std::abs(celsius);
  const double error_k = most_k * symmetric_draw(key_of(seed_, description_.name + "/" + f.name + " sensor"));
  return resistance_at(*f.sensor, celsius + error_k);
}

double Meter::seen_value(std::size_t function, const StepMeans& means) const {
  const MeterFunction& f = description_.functions[function];
  const Wiring& w = wiring_[function];
  if (w.shorted) return 0.0;
  double value = true_value(function, means);
  if (f.sensor) value = sensor_ohm(function, value);
  if (w.quantity == Quantity::current && f.shunt) {
    value *= volts_per_ampere(function, (w.port == Port::input ? means.input : means.output).meter_current);
  }
  if (f.scale == 1.0 && f.scale_tolerance_percent == 0.0) return value;
  const double error = 0.01 * f.scale_tolerance_percent *
                       symmetric_draw(key_of(seed_, description_.name + "/" + f.name + " scale"));
  return value / (f.scale * (1.0 + error));
}

std::optional<double> Meter::circuits_gain(std::size_t power, const StepMeans& means) const {
  const MeterFunction& f = description_.functions[power];
  if (!description_.power_from_circuits || f.quantity != Quantity::power) return std::nullopt;
  double sum = 0.0;
  double bound = 0.0;
  for (const Quantity wanted : {Quantity::voltage, Quantity::current}) {
    const auto& all = description_.functions;
    const auto found = std::find_if(all.begin(), all.end(), [&](const MeterFunction& other) {
      return other.quantity == wanted && other.port == f.port && !other.ranges.empty();
    });
    if (found == all.end()) return std::nullopt;
    const auto circuit = static_cast<std::size_t>(found - all.begin());
    const double value = seen_value(circuit, means);
    const auto range = range_for(circuit, std::abs(value));
    if (!range) return std::nullopt;
    sum += error(circuit, *range, value).gain;
    bound += 0.01 * found->ranges[*range].reading_percent;
  }
  const double value = seen_value(power, means);
  const auto range = range_for(power, std::abs(value));
  if (!range) return std::nullopt;
  const double promised = 0.01 * f.ranges[*range].reading_percent;
  if (bound >= promised) return bound > 0.0 ? sum * promised / bound : 0.0;
  const double place = value / f.ranges[*range].full_scale;
  const std::string name = description_.name + "/" + f.name + " own gain";
  return sum + (promised - bound) * shared_draw(seed_, run_, name, *range, place);
}

Shown Meter::show(std::size_t function, double value, std::int64_t conversion,
                  std::optional<double> gain) const {
  const MeterFunction& f = description_.functions[function];
  if (f.ranges.empty()) return {value, 0.0, 0.0, false};
  const auto range = range_for(function, std::abs(value));
  if (!range) {
    const std::size_t stands = f.fixed_range >= 0
                                   ? std::min(static_cast<std::size_t>(f.fixed_range), f.ranges.size() - 1)
                                   : f.ranges.size() - 1;
    return {value, f.ranges[stands].full_scale, f.ranges[stands].digit, true};
  }
  const MeterRange& r = f.ranges[*range];
  const DrawnError drawn = error(function, *range, value);
  double shown = value * (1.0 + gain.value_or(drawn.gain)) + drawn.offset;
  if (f.nonlinearity_percent != 0.0)
    shown += 0.01 * f.nonlinearity_percent * r.full_scale *
             std::sin(2.0 * std::numbers::pi * value / r.full_scale);
  if (f.noise > 0.0) {
    const std::string name = description_.name + "/" + f.name + " noise";
    shown += f.noise * normal_draw(key_of(seed_, name, {run_, static_cast<std::uint64_t>(conversion)}));
  }
  return {rounded(shown, r.digit), r.full_scale, r.digit, false};
}

std::vector<Shown> Meter::shown(const History& history, double time_s) const {
  const std::int64_t conversion = conversion_at(time_s);
  const double end_s = conversion_end_s(conversion);
  const StepMeans means = history.means(end_s - description_.integration_s, end_s);
  std::vector<Shown> all;
  all.reserve(description_.functions.size());
  for (std::size_t i = 0; i < description_.functions.size(); ++i)
    all.push_back(show(i, seen_value(i, means), conversion, circuits_gain(i, means)));
  return all;
}

}  // namespace loadstair::rehearsal
