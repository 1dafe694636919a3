#include "analysis/estimate/source.h"

#include <cmath>
#include <initializer_list>
#include <numbers>
#include <utility>

namespace loadstair::estimate {

namespace {

std::uint64_t fnv1a(std::string_view text) {
  std::uint64_t hash = 14695981039346656037U;
  for (const char c : text) {
    hash ^= static_cast<unsigned char>(c);
    hash *= 1099511628211U;
  }
  return hash;
}

std::string joined(std::initializer_list<std::string_view> parts) {
  std::string out;
  for (const std::string_view part : parts) {
    if (!out.empty()) out += '/';
    for (const char c : part) {
      if (c == '/' || c == '\\') out += '\\';
      out += c;
    }
  }
  return out;
}

}  // namespace

SourcePtr make_source(Source source) {
  source.order = fnv1a(source.key);
  return std::make_shared<const Source>(std::move(source));
}

SourcePtr make_type_a(std::string key, std::string name, double degrees_of_freedom, Owner owner) {
  Source source;
  source.key = std::move(key);
  source.name = std::move(name);
  source.kind = Kind::type_a;
  source.degrees_of_freedom = degrees_of_freedom;
  source.owner = std::move(owner);
  return make_source(std::move(source));
}

SourcePtr make_type_b(std::string key, std::string name, Distribution distribution, Owner owner) {
  Source source;
  source.key = std::move(key);
  source.name = std::move(name);
  source.distribution = distribution;
  source.owner = std::move(owner);
  return make_source(std::move(source));
}

bool before(const Source& a, const Source& b) {
  if (a.order != b.order) return a.order < b.order;
  return &a != &b && a.key < b.key;
}

double half_width_per_u(Distribution distribution, double coverage_factor) {
  switch (distribution) {
    case Distribution::normal:
      return coverage_factor;
    case Distribution::rectangular:
      return std::numbers::sqrt3;
    case Distribution::triangular:
      return std::sqrt(6.0);
    case Distribution::arcsine:
      return std::numbers::sqrt2;
  }
  return coverage_factor;
}

namespace key {

std::string meter(const Owner& meter, std::string_view part) {
  return joined({"meter", meter.instrument, meter.function, meter.range, part});
}

std::string meter_in_run(const Owner& meter, std::string_view part, std::string_view run) {
  return joined({"meter", meter.instrument, meter.function, meter.range, part, "run", run});
}

std::string meter_at_level(const Owner& meter, std::string_view part, std::string_view run,
                           std::string_view level) {
  return joined({"meter", meter.instrument, meter.function, meter.range, part, "run", run, "level", level});
}

std::string component(std::string_view name, std::string_view part) {
  return joined({"component", name, part});
}

std::string window(std::string_view run, std::string_view step, std::string_view part) {
  return joined({"window", run, step, part});
}

}  // namespace key

}  // namespace loadstair::estimate
