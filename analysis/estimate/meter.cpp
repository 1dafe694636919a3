#include "analysis/estimate/meter.h"

#include <algorithm>
#include <cmath>
#include <numbers>
#include <utility>

namespace loadstair::estimate {

namespace {

std::string meter_name(const Owner& meter) {
  std::string out = meter.instrument;
  if (!meter.function.empty()) out += (out.empty() ? "" : " ") + meter.function;
  if (!meter.range.empty()) out += " on " + meter.range;
  return out;
}

/// Standard uncertainties that a specification gives at a reading, unit of the reading.
struct Parts {
  double gain = 0;  ///< signed as the reading
  double offset = 0;
};

std::optional<std::string> fault_of(double reading, const MeterRange& meter, const Shares& shares) {
  if (!std::isfinite(reading)) return "the reading is not a finite number";
  if (!meter.accuracy) return "uncertainty not known: no accuracy is declared for this range";
  const AccuracySpec& spec = *meter.accuracy;
  const double least = std::min({spec.percent_of_reading, spec.percent_of_range, spec.digits, meter.range,
                                 meter.digit, shares.fixed, shares.per_run, shares.per_level});
  if (!(least >= 0)) return "an accuracy, range, digit or share is below zero";
  if (std::abs(shares.fixed + shares.per_run + shares.per_level - 1) > 1e-9)
    return "the shares do not sum to 1";
  if (spec.distribution == Distribution::normal && !(spec.coverage_factor > 0)) {
    return "the coverage factor of the declared limits is not above zero";
  }
  if (spec.percent_of_range > 0 && !(meter.range > 0))
    return "a % of range is declared, but not the range's full scale";
  if (spec.digits > 0 && !(meter.digit > 0)) return "digits are declared, but not what the last digit weighs";
  return std::nullopt;
}

Parts parts_of(double reading, const MeterRange& meter) {
  const AccuracySpec& spec = *meter.accuracy;
  const double per_u = half_width_per_u(spec.distribution, spec.coverage_factor);
  return {spec.percent_of_reading / 100 * reading / per_u,
          (spec.percent_of_range / 100 * meter.range + spec.digits * meter.digit) / per_u};
}

/// Share of range below which another range would help, and where a reading would sit on a better one.
constexpr double kLowInRange = 0.4;
constexpr double kWellInRange = 0.8;

SourcePtr part_source(std::string key, std::string_view part, const MeterRange& meter, Remedy remedy,
                      double variance_left) {
  Source source;
  source.key = std::move(key);
  source.name = meter_name(meter.meter) + ": " + std::string{part};
  source.distribution = meter.accuracy->distribution;
  source.owner = meter.meter;
  source.remedy = remedy;
  source.variance_left = variance_left;
  return make_source(std::move(source));
}

/// A part's fixed share and its share per run. A tie check replaces the fixed one.
void add_lasting(std::vector<Term>& terms, std::string_view part, double u, const MeterRange& meter,
                 const Occasion& occasion, const Shares& shares, Remedy remedy, double variance_left) {
  terms.push_back({part_source(key::meter(meter.meter, part), part, meter, remedy, variance_left),
                   u * std::sqrt(shares.fixed)});
  terms.push_back({part_source(key::meter_in_run(meter.meter, part, occasion.run), part, meter, remedy,
                               remedy == Remedy::tie_check ? 1 : variance_left),
                   u * std::sqrt(shares.per_run)});
}

void add_offset(std::vector<Term>& terms, double reading, double u, const MeterRange& meter,
                const Occasion& occasion, const Shares& shares) {
  if (meter.range > 0 && std::abs(reading) < kLowInRange * meter.range) {
    const double better = std::abs(reading) / (kWellInRange * meter.range);
    add_lasting(terms, "offset", u, meter, occasion, shares, Remedy::another_range, better * better);
  } else {
    add_lasting(terms, "offset", u, meter, occasion, shares, Remedy::tie_check, 0);
  }
}

void add_level(std::vector<Term>& terms, const Parts& parts, const MeterRange& meter,
               const Occasion& occasion, const Shares& shares) {
  const double u = std::sqrt(shares.per_level) * std::hypot(parts.gain, parts.offset);
  const std::string key = key::meter_at_level(meter.meter, "linearity", occasion.run, occasion.level);
  terms.push_back({part_source(key, "linearity", meter, Remedy::none, 1), u});
  if (meter.accuracy->digits > 0 || !(meter.digit > 0)) return;
  Source source;
  source.key = key::meter_at_level(meter.meter, "resolution", occasion.run, occasion.level);
  source.name = meter_name(meter.meter) + ": resolution";
  source.resolution = true;
  source.distribution = Distribution::rectangular;
  source.owner = meter.meter;
  terms.push_back({make_source(std::move(source)), meter.digit / std::sqrt(12.0)});
}

}  // namespace

Quoted with_meter_error(double reading, const MeterRange& meter, const Occasion& occasion,
                        const Shares& shares) {
  if (auto fault = fault_of(reading, meter, shares)) return base::Refusal{meter_name(meter.meter), *fault};
  const Parts parts = parts_of(reading, meter);
  std::vector<Term> terms;
  add_lasting(terms, "gain", parts.gain, meter, occasion, shares, Remedy::tie_check, 0);
  add_offset(terms, reading, parts.offset, meter, occasion, shares);
  add_level(terms, parts, meter, occasion, shares);
  return Estimate{reading, std::move(terms)};
}

namespace {

/// The wattmeter's gain error as far as the gain sources of voltage and current carry it, and the rest on its
/// own.
void add_power_gain(std::vector<Term>& terms, const WattmeterReading& reading, double gain,
                    const Occasion& occasion, const Shares& shares) {
  const auto relative = [](double value, const MeterRange& meter) {
    return value == 0 ? 0 : parts_of(value, meter).gain / value;
  };
  const double of_voltage = relative(reading.voltage, reading.voltage_range);
  const double of_current = relative(reading.current, reading.current_range);
  const double both = std::hypot(of_voltage, of_current);
  const double own = reading.active_power == 0 ? 0 : gain / reading.active_power;
  const double scale = both > 0 ? std::min(1.0, own / both) : 0;
  const double carried = reading.active_power * scale;
  add_lasting(terms, "gain", carried * of_voltage, reading.voltage_range, occasion, shares, Remedy::tie_check,
              0);
  add_lasting(terms, "gain", carried * of_current, reading.current_range, occasion, shares, Remedy::tie_check,
              0);
  const double rest = std::sqrt(std::max(0.0, own * own - scale * scale * both * both));
  add_lasting(terms, "gain", reading.active_power * rest, reading.power_range, occasion, shares,
              Remedy::tie_check, 0);
}

/// dP = V I sin(phi) d(phi).
void add_phase(std::vector<Term>& terms, const WattmeterReading& reading) {
  const double apparent = std::abs(reading.voltage * reading.current);
  if (!(apparent > 0)) return;
  const double cosine = std::clamp(reading.active_power / apparent, -1.0, 1.0);
  Source source;
  source.key = key::meter(reading.power_range.meter, "phase");
  source.name = meter_name(reading.power_range.meter) + ": phase";
  source.distribution = Distribution::rectangular;
  source.owner = reading.power_range.meter;
  source.remedy = Remedy::capture;
  source.variance_left = 0;
  terms.push_back({make_source(std::move(source)), apparent * std::sqrt(1 - cosine * cosine) *
                                                       reading.phase_limit_rad / std::numbers::sqrt3});
}

}  // namespace

base::Outcome<WattmeterEstimates> with_wattmeter_error(const WattmeterReading& reading,
                                                       const Occasion& occasion, const Shares& shares) {
  auto voltage = with_meter_error(reading.voltage, reading.voltage_range, occasion, shares);
  if (!voltage) return voltage.refusal();
  auto current = with_meter_error(reading.current, reading.current_range, occasion, shares);
  if (!current) return current.refusal();
  const MeterRange& range = reading.power_range;
  auto fault = fault_of(reading.active_power, range, shares);
  if (!fault && !(reading.phase_limit_rad >= 0)) fault = "the phase error's limit is below zero";
  if (fault) return base::Refusal{meter_name(range.meter), *fault};

  const Parts parts = parts_of(reading.active_power, range);
  std::vector<Term> terms;
  add_power_gain(terms, reading, parts.gain, occasion, shares);
  add_offset(terms, reading.active_power, parts.offset, range, occasion, shares);
  add_level(terms, parts, range, occasion, shares);
  add_phase(terms, reading);
  return WattmeterEstimates{*std::move(voltage), *std::move(current),
                            Estimate{reading.active_power, std::move(terms)}};
}

}  // namespace loadstair::estimate
