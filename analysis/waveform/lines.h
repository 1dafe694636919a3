// Single spectral lines over a span, and resampling onto a whole number of points; private to this room.
#pragma once

#include <complex>
#include <cstddef>
#include <span>
#include <vector>

#include "analysis/waveform/fundamental.h"
#include "analysis/waveform/prepare.h"

namespace loadstair::waveform {

/// sum of weight_k x_k exp(-2 pi j k/period), k counted from the record's first sample.
std::complex<double> fundamental_sum(const Prepared& channel, const SpanSum& span, double period);

/// Complex amplitudes c_h of orders 1 .. orders (index 0 is order 1): x = mean + Re sum c_h exp(2 pi j h
/// k/period), k from the record's first sample. A transform where the window is coherent, end-corrected sums
/// elsewhere.
std::vector<std::complex<double>> line_amplitudes(const Prepared& channel, const CycleWindow& window,
                                                  double mean, int orders);

/// Takes the lines of orders 1 .. out of the samples; sample 0 is the record's first.
void subtract_lines(std::vector<double>& samples, const std::vector<std::complex<double>>& lines,
                    double period);

/// `count` equidistant values over [begin, begin + length), by 8-point interpolation (Lagrange) of the
/// samples; where the points fall on samples, the samples.
void resample(const Prepared& channel, double begin, double length, std::size_t count, double* into);

}  // namespace loadstair::waveform
