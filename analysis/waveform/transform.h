// Discrete Fourier transforms of real data, behind one planner; private to this room.
#pragma once

#include <complex>
#include <cstddef>
#include <functional>
#include <vector>

namespace loadstair::waveform {

/// X_k = sum_n x_n exp(-2 pi j k n/N), k = 0..N/2, of x_n = sample(n). Plans are FFTW_ESTIMATE, so that the
/// same data give the same bits; planning holds a mutex, since FFTW's planner is not safe to share.
/// Precondition: 1 <= count <= 2^30.
std::vector<std::complex<double>> real_transform(std::size_t count,
                                                 const std::function<void(double* into)>& fill);

/// Back again: x_n with sum over all lines, divided by N. spectrum: N/2 + 1 lines of a real signal of `count`
/// samples.
std::vector<double> real_inverse(std::vector<std::complex<double>> spectrum, std::size_t count);

/// The smallest 2^a 3^b 5^c that is at least `least`.
std::size_t good_size(std::size_t least);

}  // namespace loadstair::waveform
