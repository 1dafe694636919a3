// Notices a meter whose display has stopped although it should still be moving.
#pragma once

#include <array>
#include <cstddef>
#include <cstdint>

namespace loadstair::instrument {

/// Watches the values of one quantity from one free-running meter. A value that stays the same is suspicious
/// only where the meter was restless just before: to and fro over at least four different values within a
/// narrow band, and the present value within that band. A meter too coarse to show noise, one at rest at
/// zero, or a slow drift that comes to its end is never called stuck. Thresholds: common practice, no source.
class StuckWatch {
 public:
  /// conversion_ns  between two values that may differ: the longer of update and poll period.
  explicit StuckWatch(std::int64_t conversion_ns) : conversion_ns_{conversion_ns} {}

  /// Takes the next value. Returns: the meter is stuck.
  bool observe(double value, std::int64_t t_ns);

 private:
  static constexpr std::size_t kKept = 16;

  [[nodiscard]] bool restless_around(double value) const;

  std::int64_t conversion_ns_;
  std::array<double, kKept> changes_{};  ///< the last values, each different from the one before
  std::size_t count_ = 0;
  double last_ = 0.0;
  std::int64_t since_ns_ = 0;        ///< of the present value
  std::int64_t longest_run_ns_ = 0;  ///< among the values kept
  bool any_ = false;
};

}  // namespace loadstair::instrument
