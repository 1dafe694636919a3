#include "analysis/waveform/prepare.h"

#include <algorithm>
#include <cmath>
#include <limits>
#include <optional>
#include <string>

#include "analysis/base/number.h"

namespace loadstair::waveform {
namespace {

using base::Refusal;

std::string count_text(std::size_t count) {
  return base::print_integer(static_cast<std::int64_t>(count));
}

enum class Gap { blank, high, low };

struct Range {
  double low = std::numeric_limits<double>::infinity();
  double high = -std::numeric_limits<double>::infinity();
};

/// What a run of missing samples [first, past) stands for. Infinite samples say it themselves; others are
/// taken as clipped when the record has clipped samples of that side and a neighbour stands near that end of
/// the range.
Gap kind_of(const Channel& channel, std::size_t first, std::size_t past, const Range& range) {
  if (std::isinf(channel.values[first])) return channel.values[first] > 0.0 ? Gap::high : Gap::low;
  constexpr double kNear = 0.9;
  const double span = range.high - range.low;
  double nearest_high = -std::numeric_limits<double>::infinity();
  double nearest_low = std::numeric_limits<double>::infinity();
  for (const std::size_t k : {first - 1, past}) {
    if (k >= channel.values.size()) continue;  // also first - 1 of a run at the very start
    nearest_high = std::max(nearest_high, channel.values[k]);
    nearest_low = std::min(nearest_low, channel.values[k]);
  }
  if (channel.clipped_high > 0 && nearest_high >= range.low + kNear * span) return Gap::high;
  if (channel.clipped_low > 0 && nearest_low <= range.high - kNear * span) return Gap::low;
  return Gap::blank;
}

void fill(Prepared& out, const Channel& channel, std::size_t first, std::size_t past, const Range& range) {
  const Gap gap = kind_of(channel, first, past, range);
  if (gap != Gap::blank) {
    std::fill(out.filled.begin() + static_cast<std::ptrdiff_t>(first),
              out.filled.begin() + static_cast<std::ptrdiff_t>(past),
              gap == Gap::high ? range.high : range.low);
    out.clipped += past - first;
    return;
  }
  const bool has_left = first > 0;
  const bool has_right = past < out.filled.size();
  const double left = has_left ? out.filled[first - 1] : out.filled[past];
  const double right = has_right ? out.filled[past] : left;
  const double steps = static_cast<double>(past - first + 1);
  for (std::size_t k = first; k < past; ++k) {
    out.filled[k] = left + (right - left) * static_cast<double>(k - first + 1) / steps;
  }
}

bool same_gap(double a, double b) {
  return !std::isfinite(b) && std::isinf(a) == std::isinf(b) && (!std::isinf(a) || (a > 0.0) == (b > 0.0));
}

/// Squares of squares must stay numbers: magnitudes beyond 1e60, or all below 1e-60, are no measurement.
std::optional<Refusal> beyond_numbers(const Channel& channel, const Range& range, std::size_t finite) {
  if (finite == 0) return std::nullopt;
  constexpr double kMost = 1e60;
  constexpr double kLeast = 1e-60;
  const double scale = std::abs(channel.scale);
  const double largest = std::max(std::abs(range.low), std::abs(range.high));
  const bool zero = largest == 0.0;
  const double value = scale * largest + std::abs(channel.offset);
  const bool good = value <= kMost && scale <= kMost && scale >= kLeast && largest <= kMost &&
                    (zero || largest >= kLeast) && (zero || scale * largest >= kLeast);
  if (good) return std::nullopt;
  return Refusal{"channel " + channel.name, "values of " + base::print_significant(largest, 3) +
                                                " with a scale of " +
                                                base::print_significant(channel.scale, 3) +
                                                " are beyond what can be computed: check scale and unit"};
}

}  // namespace

base::Outcome<Prepared> prepare(const Channel& channel) {
  const std::string place = "channel " + channel.name;
  Prepared out;
  out.samples = channel.values;
  out.scale = channel.scale;
  out.offset = channel.offset;
  if (!std::isfinite(channel.scale) || channel.scale == 0.0 || !std::isfinite(channel.offset) ||
      !std::isfinite(channel.delay_s)) {
    return Refusal{place, "scale, offset and delay must be numbers, and the scale not zero"};
  }
  Range range;
  std::size_t finite = 0;
  for (const double sample : channel.values) {
    if (!std::isfinite(sample)) continue;
    range.low = std::min(range.low, sample);
    range.high = std::max(range.high, sample);
    ++finite;
    if ((channel.range_high && sample >= *channel.range_high) ||
        (channel.range_low && sample <= *channel.range_low)) {
      ++out.clipped;
    }
  }
  const std::size_t count = channel.values.size();
  if (const auto reason = beyond_numbers(channel, range, finite)) return *reason;
  if (finite == 0) return Refusal{place, "all " + count_text(count) + " samples are clipped or blank"};
  out.missing = count - finite;
  if (out.missing > 0) {
    out.filled.assign(channel.values.begin(), channel.values.end());
    const std::size_t at_range_end = out.clipped;
    for (std::size_t first = 0; first < count; ++first) {
      if (std::isfinite(channel.values[first])) continue;
      std::size_t past = first + 1;
      while (past < count && same_gap(channel.values[first], channel.values[past])) ++past;
      // Neighbouring runs of another kind are filled in turn; a blank run needs finite ends on both sides.
      if (past < count && !std::isfinite(channel.values[past]) && std::isnan(channel.values[first])) {
        out.filled[past] = channel.values[past] > 0.0 ? range.high : range.low;
      }
      fill(out, channel, first, past, range);
      first = past - 1;
    }
    out.samples = out.filled;
    out.blank = out.missing - (out.clipped - at_range_end);
    if (static_cast<double>(out.blank) > 0.01 * static_cast<double>(count)) {
      return Refusal{place,
                     count_text(out.blank) + " of " + count_text(count) +
                         " samples are blank; more than 1 % cannot be filled in: export the record again"};
    }
  }
  if (out.clipped * 2 > count) {
    return Refusal{place, count_text(out.clipped) + " of " + count_text(count) +
                              " samples are clipped: set a larger range and capture again"};
  }
  return out;
}

}  // namespace loadstair::waveform
