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

std::optional<efficiency::StepNoise> noise_of(const StepValues& values, const efficiency::StepResult& ports) {
  const std::vector<setup::Port>& declared = values.hookup->ports;
  std::vector<Product> products;
  std::vector<const ChannelValue*> linked;
  for (std::size_t i = 0; i < declared.size(); ++i) {
    products.push_back(product_of(declared[i], ports.ports[i], values));
    if (!declared[i].counted) products.back() = Product{{}, 0.0};
    for (const ChannelValue* factor : products.back().factors) {
      if (std::find(linked.begin(), linked.end(), factor) == linked.end()) linked.push_back(factor);
    }
  }
  if (linked.empty()) return std::nullopt;
  std::vector<series::TimeSeries> series;
  std::vector<double> half_width_s;
  double correlation_s = 0.0;
  for (const ChannelValue* value : linked) {
    series.push_back(value->stretch.values());
    half_width_s.push_back(mean_half_width(value->stretch));
    correlation_s = std::max(correlation_s, correlation_of(*values.hookup, *value->channel));
  }
  const auto aligned = series::align_all(series, half_width_s);
  if (!aligned) return std::nullopt;
  std::vector<std::vector<double>> power_w;
  for (const Product& product : products) {
    std::vector<double>& power = power_w.emplace_back(aligned->time_s.size(), product.constant);
    for (const ChannelValue* factor : product.factors) {
      const auto row =
          static_cast<std::size_t>(std::find(linked.begin(), linked.end(), factor) - linked.begin());
      for (std::size_t k = 0; k < power.size(); ++k) power[k] *= aligned->value[row][k];
    }
  }
  std::vector<efficiency::PortSeries> port_series;
  for (std::size_t i = 0; i < declared.size(); ++i) {
    const bool input = declared[i].direction == setup::Direction::input;
    efficiency::Role role = input ? efficiency::Role::input : efficiency::Role::output;
    if (!declared[i].counted) {
      role = input ? efficiency::Role::auxiliary_input : efficiency::Role::auxiliary_output;
    }
    port_series.push_back({role, declared[i].counted, power_w[i]});
  }
  auto noise = efficiency::step_noise(aligned->time_s, port_series, values.context.id(),
                                      {.declared_correlation_s = correlation_s});
  if (!noise) return std::nullopt;
  return std::move(*noise);
}

}  // namespace loadstair::evaluation
