#include "daemon/evaluation/port_series.h"

#include <algorithm>
#include <map>

#include "analysis/series/align.h"

namespace loadstair::evaluation {
namespace {

/// The channels whose product is the port's power, and the factor that stays the same.
struct Product {
  std::vector<const ChannelValue*> factors;
  double constant = 1.0;
};

void multiply(Product& product, const ChannelValue* value) {
  if (value == nullptr || !value->plain) return;
  if (value->window) {
    product.factors.push_back(value);
  } else {
    product.constant *= value->plain->value();
  }
}

/// A capture's or a declared power factor stays the same; a channel's varies with its readings.
void multiply_power_factor(Product& product, const setup::Port& port, const efficiency::PortPower& power,
                           const StepValues& values) {
  const CaptureAnalysis* capture = capture_of(values.captures, port.name);
  const bool captured = capture != nullptr && capture->quote.power.power_factor.ok();
  const ChannelValue* polled = captured ? nullptr : values.find(port.power_factor);
  if (polled != nullptr && polled->window) {
    multiply(product, polled);
  } else if (power.power_factor) {
    product.constant *= power.power_factor->value();
  }
}

Product product_of(const setup::Port& port, const efficiency::PortPower& power, const StepValues& values) {
  Product product;
  if (power.method == "wattmeter") {
    multiply(product, values.find(port.power));
  } else if (power.method == "V x I" || power.method == "V x I x PF") {
    multiply(product, values.find(port.voltage));
    multiply(product, values.find(port.current));
    if (power.method == "V x I x PF") multiply_power_factor(product, port, power, values);
  } else if (power.active_power) {
    product.constant = power.active_power->value();
  }
  return product;
}

double mean_half_width(const Stretch& stretch) {
  double sum = 0.0;
  for (std::size_t i = stretch.first; i < stretch.last; ++i) sum += stretch.track->half_width_s[i];
  return sum / static_cast<double>(stretch.size());
}

}  // namespace

namespace {

/// Each port's power at common instants, one row per port.
struct Powers {
  std::vector<double> time_s;
  std::vector<std::vector<double>> power_w;
};

std::vector<const ChannelValue*> channels_of(const std::vector<Product>& products) {
  std::vector<const ChannelValue*> linked;
  for (const Product& product : products) {
    for (const ChannelValue* factor : product.factors) {
      if (std::find(linked.begin(), linked.end(), factor) == linked.end()) linked.push_back(factor);
    }
  }
  return linked;
}

/// stretches   one per channel of `linked`
std::optional<Powers> powers_of(const std::vector<Product>& products,
                                const std::vector<const ChannelValue*>& linked,
                                const std::vector<Stretch>& stretches) {
  std::vector<series::TimeSeries> series;
  std::vector<double> half_width_s;
  for (const Stretch& stretch : stretches) {
    if (stretch.size() == 0) return std::nullopt;
    series.push_back(stretch.values());
    half_width_s.push_back(mean_half_width(stretch));
  }
  auto aligned = series::align_all(series, half_width_s);
  if (!aligned) return std::nullopt;
  Powers out;
  for (const Product& product : products) {
    std::vector<double>& power = out.power_w.emplace_back(aligned->time_s.size(), product.constant);
    for (const ChannelValue* factor : product.factors) {
      const auto row =
          static_cast<std::size_t>(std::find(linked.begin(), linked.end(), factor) - linked.begin());
      for (std::size_t k = 0; k < power.size(); ++k) power[k] *= aligned->value[row][k];
    }
  }
  out.time_s = std::move(aligned->time_s);
  return out;
}

/// A port that is not counted is nothing.
std::vector<Product> products_of(const StepValues& values, const efficiency::StepResult& ports) {
  std::vector<Product> products;
  const std::vector<setup::Port>& declared = values.hookup->ports;
  for (std::size_t i = 0; i < declared.size(); ++i) {
    products.push_back(product_of(declared[i], ports.ports[i], values));
    if (!declared[i].counted) products.back() = Product{{}, 0.0};
  }
  return products;
}

}  // namespace

namespace {

/// Sums of the counted ports of one direction.
std::vector<double> sum_of(const Powers& powers, const std::vector<setup::Port>& ports,
                           setup::Direction direction) {
  std::vector<double> sum(powers.time_s.size(), 0.0);
  for (std::size_t i = 0; i < ports.size(); ++i) {
    if (!ports[i].counted || ports[i].direction != direction) continue;
    for (std::size_t k = 0; k < sum.size(); ++k) sum[k] += powers.power_w[i][k];
  }
  return sum;
}

/// Of input and output power over the whole steady stretch, the longer one; nullopt where it is hardly longer
/// than the window.
std::optional<double> stretch_correlation(const StepValues& values, const std::vector<Product>& products,
                                          const std::vector<const ChannelValue*>& linked, double declared_s) {
  std::vector<Stretch> stretches;
  for (const ChannelValue* value : linked) {
    stretches.push_back(steady_stretch(*value->stretch.track, values.context));
    if (!longer_than(stretches.back(), value->stretch)) return std::nullopt;
  }
  const auto powers = powers_of(products, linked, stretches);
  if (!powers) return std::nullopt;
  std::optional<double> longest_s;
  for (const setup::Direction direction : {setup::Direction::input, setup::Direction::output}) {
    const std::vector<double> sum = sum_of(*powers, values.hookup->ports, direction);
    const auto found = series::steady_window({powers->time_s, sum}, {.declared_correlation_s = declared_s});
    if (found) longest_s = std::max(longest_s.value_or(0.0), found->correlation_time_s);
  }
  return longest_s;
}

}  // namespace

std::optional<efficiency::StepNoise> noise_of(const StepValues& values, const efficiency::StepResult& ports) {
  const std::vector<setup::Port>& declared = values.hookup->ports;
  const std::vector<Product> products = products_of(values, ports);
  const std::vector<const ChannelValue*> linked = channels_of(products);
  if (linked.empty()) return std::nullopt;
  std::vector<Stretch> stretches;
  double correlation_s = 0.0;
  for (const ChannelValue* value : linked) {
    stretches.push_back(value->stretch);
    correlation_s = std::max(correlation_s, correlation_of(*values.hookup, *value->channel));
  }
  const auto powers = powers_of(products, linked, stretches);
  if (!powers) return std::nullopt;
  std::vector<efficiency::PortSeries> port_series;
  for (std::size_t i = 0; i < declared.size(); ++i) {
    const bool input = declared[i].direction == setup::Direction::input;
    efficiency::Role role = input ? efficiency::Role::input : efficiency::Role::output;
    if (!declared[i].counted) {
      role = input ? efficiency::Role::auxiliary_input : efficiency::Role::auxiliary_output;
    }
    port_series.push_back({role, declared[i].counted, powers->power_w[i]});
  }
  auto noise = efficiency::step_noise(
      powers->time_s, port_series, values.context.id(),
      {.declared_correlation_s = correlation_s,
       .stretch_correlation_s = stretch_correlation(values, products, linked, correlation_s)});
  if (!noise) return std::nullopt;
  return std::move(*noise);
}

std::optional<LossSeries> loss_between(const StepValues& values, const efficiency::StepResult& ports,
                                       double from_s, double to_s) {
  const std::vector<setup::Port>& declared = values.hookup->ports;
  const std::vector<Product> products = products_of(values, ports);
  for (std::size_t i = 0; i < declared.size(); ++i) {
    if (declared[i].counted && products[i].factors.empty()) return std::nullopt;
  }
  const std::vector<const ChannelValue*> linked = channels_of(products);
  if (linked.empty()) return std::nullopt;
  std::vector<Stretch> stretches;
  for (const ChannelValue* value : linked) stretches.push_back(stretch(*value->stretch.track, from_s, to_s));
  auto powers = powers_of(products, linked, stretches);
  if (!powers) return std::nullopt;
  LossSeries out;
  out.loss_w.assign(powers->time_s.size(), 0.0);
  for (std::size_t i = 0; i < declared.size(); ++i) {
    const double sign = declared[i].direction == setup::Direction::input ? 1.0 : -1.0;
    if (!declared[i].counted) continue;
    for (std::size_t k = 0; k < out.loss_w.size(); ++k) out.loss_w[k] += sign * powers->power_w[i][k];
  }
  out.time_s = std::move(powers->time_s);
  return out;
}

}  // namespace loadstair::evaluation
