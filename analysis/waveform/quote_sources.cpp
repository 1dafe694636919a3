#include "analysis/waveform/quote_sources.h"

#include <cmath>
#include <numbers>
#include <utility>

namespace loadstair::waveform {
namespace {

using estimate::Estimate;

std::string called(const estimate::Owner& owner, const std::string& what) {
  return owner.instrument + (owner.range.empty() ? "" : " on " + owner.range) + ": " + what;
}

}  // namespace

Estimate shared_error(const ChannelAccuracy& accuracy, const std::string& part, double half_width,
                      const estimate::Occasion& occasion) {
  if (!(half_width > 0.0)) return Estimate{0.0};
  const double u = half_width / std::numbers::sqrt3;
  const auto source = [&](std::string key) {
    return estimate::make_type_b(std::move(key), called(accuracy.owner, part),
                                 estimate::Distribution::rectangular, accuracy.owner);
  };
  namespace key = estimate::key;
  return Estimate{0.0,
                  {{source(key::meter(accuracy.owner, part)), u * std::sqrt(accuracy.shares.fixed)},
                   {source(key::meter_in_run(accuracy.owner, part, occasion.run)),
                    u * std::sqrt(accuracy.shares.per_run)},
                   {source(key::meter_at_level(accuracy.owner, part, occasion.run, occasion.level)),
                    u * std::sqrt(accuracy.shares.per_level)}}};
}

Estimate lasting_error(const estimate::Owner& owner, const std::string& part, double half_width) {
  if (!(half_width > 0.0)) return Estimate{0.0};
  return Estimate{0.0,
                  estimate::make_type_b(estimate::key::meter(owner, part), called(owner, part),
                                        estimate::Distribution::rectangular, owner),
                  half_width / std::numbers::sqrt3};
}

Estimate own_error(const estimate::Occasion& occasion, const std::string& part, double standard_uncertainty,
                   estimate::Distribution distribution) {
  if (!(standard_uncertainty > 0.0)) return Estimate{0.0};
  return Estimate{
      0.0,
      estimate::make_type_b(estimate::key::window(occasion.run, occasion.level, part), part, distribution),
      standard_uncertainty};
}

Estimate own_scatter(const estimate::Occasion& occasion, const std::string& part, double standard_uncertainty,
                     double degrees_of_freedom) {
  if (!(standard_uncertainty > 0.0) || !(degrees_of_freedom > 0.0)) return Estimate{0.0};
  return Estimate{0.0,
                  estimate::make_type_a(estimate::key::window(occasion.run, occasion.level, part), part,
                                        degrees_of_freedom),
                  standard_uncertainty};
}

ChannelErrors errors_of(const ChannelAccuracy& accuracy, const ChannelResult& channel,
                        const estimate::Occasion& occasion) {
  ChannelErrors out{accuracy};
  out.gain = gain_error(accuracy, occasion);
  out.offset = shared_error(accuracy, "offset", accuracy.offset, occasion);
  out.delay = lasting_error(accuracy.owner, "delay", accuracy.delay_s);
  out.linearity = accuracy.linearity * channel.peak_to_peak.value;
  out.bent_mean = shared_error(accuracy, "linearity, mean", out.linearity, occasion);
  // |x| times at most the half-width, over the RMS.
  const double rms = channel.rms.value;
  const double in_rms = rms > 0.0 ? out.linearity * channel.mean_rectified / rms : out.linearity;
  out.bent_rms = shared_error(accuracy, "linearity, RMS", in_rms, occasion);
  out.bent_rectified = shared_error(accuracy, "linearity, rectified mean", out.linearity, occasion);
  out.bent_peak = shared_error(accuracy, "linearity, peak", out.linearity, occasion);
  if (accuracy.bandwidth_hz)
    out.bandwidth = lasting_error(accuracy.owner, "bandwidth", accuracy.bandwidth_tolerance);
  return out;
}

std::complex<double> undone_low_pass(const ChannelAccuracy& accuracy, double frequency_hz, bool deskewed,
                                     double moved) {
  if (!accuracy.bandwidth_hz || !(*accuracy.bandwidth_hz > 0.0)) return 1.0;
  const double x = frequency_hz / (*accuracy.bandwidth_hz * moved);
  const std::complex<double> undone{1.0, x};
  // The delay that was measured at a low frequency contains the low-pass as declared, whatever its true f_b.
  return deskewed ? undone * std::polar(1.0, -x) : undone;
}

double corrected_square(const ChannelResult& channel, const ChannelAccuracy& accuracy, double moved) {
  double square = channel.rms.value * channel.rms.value;
  for (const Harmonic& line : channel.harmonics) {
    if (line.below_floor) continue;
    square +=
        line.rms * line.rms * (std::norm(undone_low_pass(accuracy, line.frequency_hz, true, moved)) - 1.0);
  }
  return square;
}

base::Refusal only_a_bound(const std::string& channel) {
  return {"channel " + channel, "only a lower bound is known: samples are clipped"};
}

}  // namespace loadstair::waveform
