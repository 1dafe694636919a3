// The recent readings of one channel as columns.
#pragma once

#include <cstddef>
#include <cstdint>
#include <span>
#include <vector>

namespace loadstair::recorder {

/// One reading of a channel, as it came and as it counts.
struct Point {
  std::int64_t t_ns = 0;           ///< monotonic instant it stands for
  std::int64_t half_width_ns = 0;  ///< half of the time it may be off by
  std::int64_t arrived_ns = 0;     ///< monotonic instant at which it was there
  double value = 0.0;       ///< converted, in the channel's unit; NaN when it cannot be used (flags say why)
  double raw = 0.0;         ///< as the instrument said it; NaN when it gave no number
  std::uint32_t flags = 0;  ///< instrument::Flag bits
};

/// A bounded window, oldest first; the oldest go when it is full. Spans stay valid until the next push.
class Window {
 public:
  /// most   readings that are kept, >= 1.
  explicit Window(std::size_t most = 20000) : most_{most} {}

  void push(const Point& point);
  void clear();

  [[nodiscard]] std::size_t size() const { return t_ns_.size() - head_; }
  [[nodiscard]] bool empty() const { return size() == 0; }
  [[nodiscard]] Point back() const;

  [[nodiscard]] std::span<const std::int64_t> t_ns() const { return view(t_ns_); }
  [[nodiscard]] std::span<const std::int64_t> half_width_ns() const { return view(half_width_ns_); }
  [[nodiscard]] std::span<const std::int64_t> arrived_ns() const { return view(arrived_ns_); }
  [[nodiscard]] std::span<const double> value() const { return view(value_); }
  [[nodiscard]] std::span<const double> raw() const { return view(raw_); }
  [[nodiscard]] std::span<const std::uint32_t> flags() const { return view(flags_); }

  /// Index of the first reading at or after `t_ns`; size() when there is none.
  [[nodiscard]] std::size_t first_from(std::int64_t t_ns) const;

 private:
  template <class T>
  [[nodiscard]] std::span<const T> view(const std::vector<T>& column) const {
    return std::span<const T>{column}.subspan(head_);
  }

  std::size_t most_;
  std::size_t head_ = 0;  ///< readings before it are gone; the columns are moved up when half of them are
  std::vector<std::int64_t> t_ns_, half_width_ns_, arrived_ns_;
  std::vector<double> value_, raw_;
  std::vector<std::uint32_t> flags_;
};

}  // namespace loadstair::recorder
