// What two runs' errors have in common, and how a difference's uncertainty hangs on it.
#pragma once

#include <span>
#include <string>

#include "analysis/estimate/estimate.h"

namespace loadstair::efficiency {

/// The estimate with the lasting errors of these owners made its run's own: a meter that was adjusted, or
/// exchanged, between two runs. Contributions keep their size; only their keys change.
/// owners   Owner::instrument of meters and parts
/// run      the run as it stands in keys
[[nodiscard]] estimate::Estimate set_apart(const estimate::Estimate& of, std::span<const std::string> owners,
                                           const std::string& run);

/// Variance of b - a over what is assumed to be shared. "Meter" are the Type B errors of meters but their
/// resolution; each meter's variance on a range (its parts that last, those per run and those per level) is
/// taken as one sum, of which a share is each run's own.
class Sharing {
 public:
  /// a, b     the same figure of two runs, as measured: before set_apart()
  /// owners   of errors that are not common whatever their keys say
  Sharing(const estimate::Estimate& a, const estimate::Estimate& b, std::span<const std::string> owners);

  /// Assumed: the part of the meter variance of both that is each run's own, 0 to 1; 0 without meters. A
  /// meter that only one run used is that run's own.
  [[nodiscard]] double unshared() const { return unshared_; }
  /// Whether a meter's errors count at all in either figure.
  [[nodiscard]] bool of_meters() const { return none_ > 0; }
  /// Variance of b - a as assumed, and if nothing whatever were shared.
  [[nodiscard]] double variance() const { return rest_ + assumed_; }
  [[nodiscard]] double variance_without_sharing() const { return without_sharing_; }
  /// Variance of b - a if the unshared share of the meter variance were another one, in [0, 1]: linear from
  /// all shared to the assumed share and from there to none shared. What meters do not cause stays.
  [[nodiscard]] double variance_at(double unshared) const;

 private:
  double rest_ = 0;     ///< of b - a, by other than meters
  double all_ = 0;      ///< by meters, everything shared
  double assumed_ = 0;  ///< by meters, as the keys and owners say
  double none_ = 0;     ///< by meters, nothing shared
  double unshared_ = 0;
  double without_sharing_ = 0;  ///< whole
};

}  // namespace loadstair::efficiency
