// Type A parts of several quantities found from the same window, correlated as the readings are.
#pragma once

#include <span>
#include <string>
#include <string_view>
#include <vector>

#include "analysis/estimate/estimate.h"
#include "analysis/series/steady_window.h"

namespace loadstair::estimate {

/// Where the sources of a window belong.
struct WindowId {
  std::string run;
  std::string step;
};

/// Values with their noise and drift as contributions.
/// windows  of the same instants (equally long residuals), in any order, each in its own unit; at least one
/// id       names the window; noise and drift sources are its own
/// Returns: one estimate per window: the value at mid-window, Type A contributions whose variances are the
/// windows' u^2
///          and whose covariances are r u_x u_y with r from the residuals, drift as one signed source common
///          to all (so that a drifting load drops out of an efficiency), and, for a window that was too
///          short, its bound as a rectangular source of its own. A window without even a bound (one reading)
///          is refused by its number.
/// Source:  JCGM 100:2008 H.2.4, second approach; the factor of the correlation matrix is Cholesky's.
[[nodiscard]] base::Outcome<std::vector<Estimate>> type_a_estimates(
    std::span<const series::SteadyWindow> windows, const WindowId& id);

/// Independent observations of several quantities made together, as in a table: no line is removed, every set
/// counts. sets     one per quantity, equally long, at least two observations, finite Returns: the means,
/// with u^2 = s^2/N, nu = N - 1 and the covariances of the sets. Source:  JCGM 100:2008 4.2, 5.2.3 equation
/// 17, H.2.
[[nodiscard]] base::Outcome<std::vector<Estimate>> repeated_observations(
    std::span<const std::span<const double>> sets, const WindowId& id);

/// One quantity on its own: what = part of the key and of the name ("output voltage").
[[nodiscard]] Quoted type_a_estimate(const series::SteadyWindow& window, const WindowId& id,
                                     std::string_view what);

}  // namespace loadstair::estimate
