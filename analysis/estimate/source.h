// Sources of error: what one is, and the one place where their keys are built.
#pragma once

#include <cstdint>
#include <limits>
#include <memory>
#include <string>
#include <string_view>

namespace loadstair::estimate {

/// Evaluated from repeated readings (A), or from anything else (B). JCGM 100:2008 4.2, 4.3.
enum class Kind { type_a, type_b };

/// Of a Type B source; Type A is Student's t with its degrees of freedom. Kept for a validation by JCGM 101;
/// the linear method needs its variance only.
enum class Distribution { normal, rectangular, triangular, arcsine };

/// What would shrink a source's contribution; a budget words it and recomputes U as if it had been done.
enum class Remedy {
  none,
  another_range,
  tie_check,
  sensing_wires,
  longer_window,
  capture,
  declare_tolerance
};

/// What a source belongs to. Parts that do not apply are empty.
struct Owner {
  std::string
      instrument;  ///< the instrument's name in the hook-up file, or a part's ("shunt S1", "leads of input")
  std::string function;  ///< "dc voltage", "ac current", "active power", ...
  std::string range;     ///< the range as the hook-up file names it, "600 V"

  bool operator==(const Owner&) const = default;
};

/// One independent cause of error, standardised: mean 0, standard deviation 1. Immutable once made.
struct Source {
  std::string
      key;  ///< identity: two sources with one key are one source. Stable over runs where the cause is
  std::string name;  ///< for people; budgets merge lines of one name ("V1 on 600 V: gain")
  Kind kind = Kind::type_b;
  Distribution distribution = Distribution::normal;
  /// Of a Type A source; infinite for Type B unless the file doubts its figure (JCGM 100:2008 G.4.2).
  double degrees_of_freedom = std::numeric_limits<double>::infinity();
  /// Type A sources found from the same readings share one sample; their variances are added before
  /// Welch-Satterthwaite counts them once. Empty: on its own.
  std::string sample;
  Owner owner;
  bool resolution = false;  ///< of the last digit: what no averaging can take away
  Remedy remedy = Remedy::none;
  /// Share of this source's variance that would be left if the remedy were taken, 0 to 1.
  double variance_left = 1;
  std::uint64_t order = 0;  ///< set by make_source() from the key: sorting without comparing text
};

using SourcePtr = std::shared_ptr<const Source>;

/// Freezes a source and sets its order (FNV-1a of the key, so that sums run in the same order everywhere).
[[nodiscard]] SourcePtr make_source(Source source);
[[nodiscard]] SourcePtr make_type_a(std::string key, std::string name, double degrees_of_freedom,
                                    Owner owner = {});
[[nodiscard]] SourcePtr make_type_b(std::string key, std::string name, Distribution distribution,
                                    Owner owner = {});

/// Whether a is sorted before b; equal keys are neither before nor after each other.
[[nodiscard]] bool before(const Source& a, const Source& b);

/// Half-width of a distribution over its standard deviation: sqrt 3 rectangular, sqrt 6 triangular, sqrt 2
/// arcsine. For normal: the coverage factor at which the limits were declared. Source: JCGM
/// 100:2008 4.3.4-4.3.9; the arcsine in annex H.1 (from memory).
[[nodiscard]] double half_width_per_u(Distribution distribution, double coverage_factor);

/// Keys. Every key is built here, so that a cause has one key whoever meets it. Parts may hold any text; a
/// slash inside a part is escaped.
namespace key {
/// meter/INSTRUMENT/FUNCTION/RANGE/PART: errors a meter brings along wherever it is connected.
[[nodiscard]] std::string meter(const Owner& meter, std::string_view part);
/// The same for one run, and for one level of one run: shares that do not last.
[[nodiscard]] std::string meter_in_run(const Owner& meter, std::string_view part, std::string_view run);
[[nodiscard]] std::string meter_at_level(const Owner& meter, std::string_view part, std::string_view run,
                                         std::string_view level);
/// component/NAME/PART: a shunt, a lead, a probe, an ammeter's resistance.
[[nodiscard]] std::string component(std::string_view name, std::string_view part);
/// window/RUN/STEP/PART: noise, drift, alignment of one averaging window.
[[nodiscard]] std::string window(std::string_view run, std::string_view step, std::string_view part);
}  // namespace key

}  // namespace loadstair::estimate
