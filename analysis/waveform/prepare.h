// Channels made ready: missing samples found, filled where that is honest; private to this room.
#pragma once

#include <cstddef>
#include <span>
#include <vector>

#include "analysis/base/outcome.h"
#include "analysis/waveform/waveform.h"

namespace loadstair::waveform {

/// A channel's samples without gaps, and how to read them in the channel's unit.
struct Prepared {
  Prepared() = default;
  Prepared(Prepared&&) =
      default;  // a moved vector keeps its memory, so the span stays right; a copy would not
  Prepared& operator=(Prepared&&) = default;
  Prepared(const Prepared&) = delete;
  Prepared& operator=(const Prepared&) = delete;
  ~Prepared() = default;

  std::span<const double> samples;  ///< of the channel itself, or of `filled`
  std::vector<double> filled;       ///< only where samples were missing
  double scale = 1.0;
  double offset = 0.0;
  std::size_t missing = 0;
  std::size_t blank = 0;    ///< of the missing ones
  std::size_t clipped = 0;  ///< filled with the range's end, or at the declared range's end

  [[nodiscard]] double operator[](std::size_t k) const { return scale * samples[k] + offset; }
  [[nodiscard]] std::size_t size() const { return samples.size(); }
};

/// Clipped samples become the largest (smallest) sample seen and make bounds of results; blank ones lie on
/// the line between their neighbours. Refuses a channel without finite samples, more than 1 % blank, more
/// than half clipped.
base::Outcome<Prepared> prepare(const Channel& channel);

}  // namespace loadstair::waveform
