#include "analysis/waveform/transform.h"

#include <fftw3.h>

#include <memory>
#include <mutex>

#include "analysis/base/require.h"

namespace loadstair::waveform {
namespace {

std::mutex& planner() {
  static std::mutex mutex;
  return mutex;
}

struct FreeFftw {
  void operator()(void* memory) const { fftw_free(memory); }
};

class Plan {
 public:
  template <class Make>
  explicit Plan(Make make) {
    const std::lock_guard lock{planner()};
    plan_ = make();
    base::require(plan_ != nullptr, "FFTW plans every size");
  }
  ~Plan() {
    const std::lock_guard lock{planner()};
    fftw_destroy_plan(plan_);
  }
  Plan(const Plan&) = delete;
  Plan& operator=(const Plan&) = delete;

  void run() const { fftw_execute(plan_); }

 private:
  fftw_plan plan_;
};

constexpr std::size_t kMost = std::size_t{1} << 30;

}  // namespace

std::vector<std::complex<double>> real_transform(std::size_t count,
                                                 const std::function<void(double* into)>& fill) {
  base::require(count >= 1 && count <= kMost, "a transform has 1 to 2^30 samples");
  const std::unique_ptr<double[], FreeFftw> input{fftw_alloc_real(count)};
  std::vector<std::complex<double>> spectrum(count / 2 + 1);
  const Plan plan{[&] {
    return fftw_plan_dft_r2c_1d(static_cast<int>(count), input.get(),
                                reinterpret_cast<fftw_complex*>(spectrum.data()),
                                FFTW_ESTIMATE | FFTW_DESTROY_INPUT);
  }};
  fill(input.get());
  plan.run();
  return spectrum;
}

std::vector<double> real_inverse(std::vector<std::complex<double>> spectrum, std::size_t count) {
  base::require(count >= 1 && count <= kMost && spectrum.size() == count / 2 + 1,
                "a spectrum of N real samples has N/2 + 1 lines");
  std::vector<double> samples(count);
  const Plan plan{[&] {
    return fftw_plan_dft_c2r_1d(static_cast<int>(count), reinterpret_cast<fftw_complex*>(spectrum.data()),
                                samples.data(), FFTW_ESTIMATE | FFTW_DESTROY_INPUT);
  }};
  plan.run();
  for (double& sample : samples) sample /= static_cast<double>(count);
  return samples;
}

std::size_t good_size(std::size_t least) {
  for (std::size_t size = least;; ++size) {
    std::size_t rest = size;
    for (const std::size_t prime : {std::size_t{2}, std::size_t{3}, std::size_t{5}}) {
      while (rest % prime == 0) rest /= prime;
    }
    if (rest == 1) return size;
  }
}

}  // namespace loadstair::waveform
