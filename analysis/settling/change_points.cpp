#include <algorithm>
#include <cmath>
#include <limits>
#include <vector>

#include "analysis/settling/exponential.h"
#include "analysis/settling/runs.h"
#include "analysis/settling/settling.h"
#include "analysis/settling/words.h"

namespace loadstair::settling {
namespace {

using base::Refusal;

constexpr std::size_t kBlocks = 128;
constexpr std::size_t kLeastPoints = 8;  ///< on either side of a change

/// A stretch of block means: what an exponential approach makes of it.
struct Piece {
  double residual_sum_of_squares = std::numeric_limits<double>::infinity();
  std::size_t points = 0;
  double value_at_start = 0.0, value_at_end = 0.0;
  double slope_at_start = 0.0, slope_at_end = 0.0;
  std::vector<double> residual;
};

/// A part with x in spans of the part, as the searches expect it.
ScaledTrace part_of(const ScaledTrace& whole, std::size_t first, std::size_t past) {
  ScaledTrace part;
  part.span_s = whole.span_s;
  const double length = whole.x[past - 1] - whole.x[first];
  for (std::size_t i = first; i < past; ++i) {
    part.x.push_back((whole.x[i] - whole.x[first]) / length);
    part.y.push_back(whole.y[i]);
  }
  return part;
}

Piece piece_of(const ScaledTrace& whole, std::size_t first, std::size_t past, bool two_constants) {
  const ScaledTrace part = part_of(whole, first, past);
  const double length = whole.x[past - 1] - whole.x[first];
  Piece out;
  out.points = past - first;
  auto found = search_one(part);
  if (two_constants) {
    auto two = search_two(part);
    if (two && (!found || two->residual_sum_of_squares < found->residual_sum_of_squares))
      found = std::move(two);
  }
  if (!found) return out;
  out.residual_sum_of_squares = found->residual_sum_of_squares;
  out.residual = found->residual;
  out.value_at_start = out.value_at_end = found->linear[0];
  for (std::size_t i = 0; i < found->rate.size(); ++i) {
    const double c = found->linear[i + 1];
    const double decay = std::exp(-found->rate[i]);
    out.value_at_start += c;
    out.value_at_end += c * decay;
    out.slope_at_start -= c * found->rate[i] / length;
    out.slope_at_end -= c * found->rate[i] * decay / length;
  }
  return out;
}

/// Coarse: the rates of a grid. Fine: the best rates.
double split_sum(const ScaledTrace& whole, std::size_t first, std::size_t at, std::size_t past, bool fine) {
  if (!fine) return coarse_sum_one(part_of(whole, first, at)) + coarse_sum_one(part_of(whole, at, past));
  return piece_of(whole, first, at, false).residual_sum_of_squares +
         piece_of(whole, at, past, false).residual_sum_of_squares;
}

/// The split with the least sum of squares: a coarse row of candidates, then its neighbourhood.
std::size_t best_split(const ScaledTrace& whole, std::size_t first, std::size_t past) {
  const std::size_t low = first + kLeastPoints;
  const std::size_t high = past - kLeastPoints;
  std::size_t best = low;
  double least = std::numeric_limits<double>::infinity();
  std::size_t stride = std::max<std::size_t>(1, (high - low) / 14);
  std::size_t from = low;
  std::size_t to = high;
  while (true) {
    const bool fine = stride == 1;
    least = std::numeric_limits<double>::infinity();
    for (std::size_t at = from; at <= to; at += stride) {
      const double sum = split_sum(whole, first, at, past, fine);
      if (sum < least) {
        least = sum;
        best = at;
      }
    }
    if (fine) return best;
    from = std::max(low, best - std::min(best - low, stride));
    to = std::min(high, best + stride);
    stride = std::max<std::size_t>(1, stride / 4);
  }
}

void search(const ScaledTrace& whole, std::size_t first, std::size_t past,
            const ChangePointSettings& settings, std::vector<double>& found, int depth) {
  if (depth == 0 || past - first < 2 * kLeastPoints + 2) return;
  if (random_signs(piece_of(whole, first, past, false).residual)) return;
  const Piece smooth = piece_of(whole, first, past, true);
  if (random_signs(smooth.residual)) return;
  const std::size_t at = best_split(whole, first, past);
  const Piece left = piece_of(whole, first, at, true);
  const Piece right = piece_of(whole, at, past, true);
  const double split = left.residual_sum_of_squares + right.residual_sum_of_squares;
  const double freedom = std::max(1.0, static_cast<double>(past - first) - 10.0);
  const double noise = std::sqrt(split / freedom);
  constexpr double kStandsOut = 20.0;
  const bool better = (smooth.residual_sum_of_squares - split) / 5.0 > kStandsOut * split / freedom;
  // Any smooth curve is followed better by two pieces; a change also breaks the slope or the level.
  constexpr double kSlopeShare = 0.25, kSlopeNoise = 6.0, kLevelNoise = 6.0;
  const double step = whole.x[at] - whole.x[at - 1];
  const double bend = std::abs(right.slope_at_start - left.slope_at_end);
  const double steepest = std::max(std::abs(right.slope_at_start), std::abs(left.slope_at_end));
  const double reach = whole.x[past - 1] - whole.x[at];
  const bool bends =
      bend > kSlopeShare * steepest && bend * reach > std::max(settings.least_jump, kSlopeNoise * noise);
  const double level = std::abs(right.value_at_start - (left.value_at_end + left.slope_at_end * step));
  const bool jumps = level > std::max(settings.least_jump, kLevelNoise * noise) && level > steepest * step;
  if (!better || (!bends && !jumps)) return;
  search(whole, first, at, settings, found, depth - 1);
  found.push_back(0.5 * (whole.x[at - 1] + whole.x[at]));
  search(whole, at, past, settings, found, depth - 1);
}

}  // namespace

base::Outcome<std::vector<double>> change_points(const Trace& trace, const ChangePointSettings& settings) {
  if (const auto reason = disorder(trace)) return *reason;
  std::vector<double> found;
  if (trace.size() < 2 * std::max(settings.least_samples, kLeastPoints) + 2) return found;
  const ScaledTrace whole = block_means(scaled(trace), kBlocks);
  constexpr int kDepth = 3;
  search(whole, 0, whole.x.size(), settings, found, kDepth);
  // The instant of the first sample after the change, so that a trace taken from there is free of what was
  // before.
  for (double& x : found) {
    const double t_s = trace.time_s.front() + x * whole.span_s;
    x = *std::lower_bound(trace.time_s.begin(), trace.time_s.end(), t_s);
  }
  return found;
}

}  // namespace loadstair::settling
