// waveform: uniformly sampled voltage and current to frequency, RMS, crest factor, harmonics and powers.
// Not for reading files (drivers/scope_csv), not for limits (analysis/limits), not for which channel is what
// (the caller names voltage and current).
#pragma once

#include <cstddef>
#include <optional>
#include <span>
#include <string>
#include <vector>

#include "analysis/base/outcome.h"

namespace loadstair::waveform {

/// One sampled channel. The span is read, never kept; a copy is made only where samples are missing.
struct Channel {
  std::string name;                ///< stands in results and refusals
  std::string unit;                ///< of the scaled value: "V", "A", ...
  std::span<const double> values;  ///< NaN or infinite where the record has no sample (clipped or blank)
  double scale = 1.0;    ///< probe ratio or shunt: value = scale * sample + offset; sign may be negative
  double offset = 0.0;   ///< in `unit`, for example minus the measured zero
  double delay_s = 0.0;  ///< known lateness of this channel; corrected in phases and powers
  std::size_t clipped_high = 0;  ///< how many missing samples stood for "above the range"
  std::size_t clipped_low = 0;   ///< how many for "below the range"
  std::optional<double>
      range_low;  ///< samples at or below it are clipped (in samples' own unit, before scale)
  std::optional<double> range_high;  ///< samples at or above it are clipped
};

/// What was captured together.
struct Waveform {
  double interval_s = 0.0;  ///< > 0, between samples
  std::vector<Channel> channels;
  std::optional<std::size_t>
      voltage;  ///< index of the channel that is the voltage; its fundamental is the common one
  std::optional<std::size_t> current;  ///< index of the channel that is the current
};

/// What kind of record is expected.
enum class Expected {
  either,       ///< a fundamental when the record has one, else mean, RMS and ripple
  alternating,  ///< no fundamental is a refusal
  direct,       ///< do not look for a fundamental: mean, RMS and ripple over the whole record
};

struct AnalysisSettings {
  int harmonics = 40;  ///< highest order, 1 to 500; fewer are given where sampling ends sooner
  Expected expected = Expected::either;
  std::optional<double>
      fundamental_hz;  ///< look for the fundamental within 20 % of it; default: the largest line
  std::optional<double> crest_band_hz;  ///< band of the crest factor; default: only the raw one
  int least_cycles = 2;                 ///< fewer whole cycles are refused; at least 1
};

/// A number that may be only a bound because samples were clipped.
struct Bounded {
  double value = 0.0;
  bool lower_bound = false;  ///< true: at least this much, print with a >= sign
};

/// The span that everything is computed over.
struct Window {
  double first_sample =
      0.0;  ///< position of its start; a fraction, at least -0.5, where ends fall between samples
  double length_samples = 0.0;  ///< cycles * samples per cycle, or all samples of a direct record
  int cycles = 0;               ///< whole cycles; 0 for a direct record
  bool coherent = false;        ///< whole cycles end on a sample: plain sums over the samples are exact
};

struct Fundamental {
  double frequency_hz = 0.0;  ///< of the window: where the record cannot tell, whole cycles end on samples
  double fitted_hz = 0.0;     ///< the estimate itself, to which the uncertainty belongs: quote this one
  double standard_uncertainty_hz =
      0.0;  ///< Type A, from the scatter of the phase over cycles; 0 below 3 cycles
};

struct Harmonic {
  int order = 0;  ///< 1 is the fundamental
  double frequency_hz = 0.0;
  double rms = 0.0;          ///< of this single line, in the channel's unit
  double share = 0.0;        ///< rms / rms of the fundamental
  double phase_deg = 0.0;    ///< of sqrt(2)*rms*cos(2 pi f t + phase), t = 0 at the first sample; (-180, 180]
  bool below_floor = false;  ///< not told from noise: rms below ChannelResult::line_floor_rms
};

/// One order by IEC 61000-4-7:2002 + A1:2008 over the windows of a record.
struct GroupedOrder {
  int order = 0;
  double group_rms = 0.0, group_rms_low = 0.0, group_rms_high = 0.0;           ///< median, least, most
  double subgroup_rms = 0.0, subgroup_rms_low = 0.0, subgroup_rms_high = 0.0;  ///< median, least, most
  double interharmonic_rms = 0.0;           ///< median of the interharmonic group above this order
  double interharmonic_subgroup_rms = 0.0;  ///< median of the centred subgroup above this order
};

/// One order smoothed over time: first-order low-pass of 1.5 s over the windows' RMS values.
struct SmoothedOrder {
  int order = 0;
  double group_rms = 0.0, group_rms_high = 0.0;        ///< mean and greatest over the record's windows
  double subgroup_rms = 0.0, subgroup_rms_high = 0.0;  ///< mean and greatest
};

/// One window that was grouped.
struct GroupWindow {
  double first_sample = 0.0, length_samples = 0.0;  ///< fractions: windows follow each other without a gap
  double frequency_hz = 0.0;                        ///< of this window alone
  double standard_uncertainty_hz = 0.0;             ///< Type A of it, from the phase of its cycles
};

struct GroupedHarmonics {
  int cycles_per_window = 0;  ///< 10 (50 Hz) or 12 (60 Hz)
  int windows = 0;
  std::vector<GroupedOrder> orders;
  double thd_group = 0.0;     ///< median over windows of THDG, orders 2 to the highest
  double thd_subgroup = 0.0;  ///< median over windows of THDS
  std::vector<GroupWindow> window_list;
  /// How well the worst window fits its own whole cycles, relative: 2 standard uncertainties of its
  /// frequency.
  double synchronisation = 0.0;
  /// Refused where the record is shorter than the smoothing's 1.5 s.
  base::Outcome<std::vector<SmoothedOrder>> smoothed = base::Refusal{};
};

/// Results of one channel. Everything in the channel's unit, ratios as ratios (never percent).
struct ChannelResult {
  std::string name;
  std::string unit;
  double mean = 0.0;
  /// Type A of the mean and of the RMS: scatter over cycles (over 20 equal parts of a direct record), divided
  /// by the root of their number; 0 below 3 cycles.
  double mean_standard_uncertainty = 0.0, rms_standard_uncertainty = 0.0;
  int degrees_of_freedom = 0;           ///< of both; 0: not known
  Bounded rms;                          ///< with direct component
  Bounded ripple_rms;                   ///< without it
  double minimum = 0.0, maximum = 0.0;  ///< of the samples in the window
  Bounded peak;                         ///< largest magnitude
  Bounded peak_to_peak;
  double mean_rectified = 0.0;
  double mean_sign = 0.0;  ///< share of the time above zero minus share below
  /// Raw peak / RMS. Coarse samples (fewer than 20 steps from the mean to the peak; common practice, no
  /// source): peak less half a step, as a lower bound.
  base::Outcome<Bounded> crest_factor = base::Refusal{};
  base::Outcome<Bounded> crest_factor_in_band = base::Refusal{};  ///< median over cycles in `crest_band_hz`
  double crest_band_hz = 0.0;                                     ///< as asked for; 0: none
  base::Outcome<double> form_factor = base::Refusal{};            ///< RMS / mean rectified
  std::vector<Harmonic> harmonics;                                ///< empty without a fundamental
  base::Outcome<double> thd_f = base::Refusal{};  ///< orders 2 to the highest, over the fundamental
  base::Outcome<double> thd_r = base::Refusal{};  ///< the same over the RMS of orders 1 to the highest
  /// All that is neither direct component nor fundamental, over the fundamental; band = half the sampling
  /// rate.
  base::Outcome<double> total_distortion = base::Refusal{};
  double total_distortion_band_hz = 0.0;  ///< half the sampling rate; 0 without a fundamental
  /// THD_F that the record's noise alone would give: below it no THD can be claimed.
  double thd_floor = 0.0;
  /// Three times the RMS that noise alone gives a single line: an order below it is not told from noise
  /// (false alarm exp(-9) each). From the median of the lines between the harmonics, so that a carrier does
  /// not count.
  double line_floor_rms = 0.0;
  std::vector<int> orders_below_floor;  ///< of `harmonics`, ascending; never the fundamental
  /// IEC 61000-4-7 groups; refused as "7 cycles, no grouping" where the record does not carry a window.
  base::Outcome<GroupedHarmonics> groups = base::Refusal{};
  /// Whether the groups may enter a decision by a standard; the reason where not.
  base::Outcome<void> standard_decision = base::Refusal{};
  double residual_rms = 0.0;  ///< neither direct component nor orders 1 to the highest: noise, switching
  /// Noise in the RMS (its square is contained in RMS^2): medians of the lines between the harmonics over the
  /// whole band, lines of a carrier left out; of a direct record the RMS of the samples' second differences
  /// over sqrt 6.
  double noise_rms = 0.0;
  /// Step of the lattice that all samples lie on; its share of RMS^2, contained in noise_rms^2, is step^2/12.
  /// 0 where it cannot be told: samples on no lattice or all equal, or an alternating record on three levels
  /// or fewer.
  double quantisation_step = 0.0;
  std::size_t missing = 0;  ///< samples filled in (blank) or set to the range's end (clipped)
};

/// Powers of the named voltage and current, IEEE Std 1459-2010 clause 3.1.2 (single phase, nonsinusoidal).
struct Power {
  double active_w = 0.0;                       ///< P = mean(v i)
  double apparent_va = 0.0;                    ///< S = V I
  double power_factor = 0.0;                   ///< P / S
  double nonactive_var = 0.0;                  ///< N = sqrt(S^2 - P^2)
  double ripple_w = 0.0;                       ///< P - mean(v) mean(i)
  double active_standard_uncertainty_w = 0.0;  ///< Type A as that of a channel's mean
  int degrees_of_freedom = 0;                  ///< of it; 0: not known
  /// The rest needs a fundamental.
  struct FundamentalSet {
    double displacement_power_factor = 0.0;  ///< P1 / S1
    double phase_deg = 0.0;                  ///< voltage before current, theta_1
    double active_w = 0.0;                   ///< P1
    double reactive_var = 0.0;               ///< Q1, > 0 inductive
    double apparent_va = 0.0;                ///< S1
    double harmonic_active_w = 0.0;          ///< PH = P - P1 (with direct component)
    double nonfundamental_va = 0.0;          ///< SN
    double current_distortion_var = 0.0;     ///< DI
    double voltage_distortion_var = 0.0;     ///< DV
    double harmonic_apparent_va = 0.0;       ///< SH
    double harmonic_distortion_var = 0.0;    ///< DH
    double voltage_thd = 0.0;                ///< V_H / V_1, V_H with direct component and everything else
    double current_thd = 0.0;
    std::vector<double> active_by_order_w;      ///< P_h, orders 1 to the highest
    std::vector<double> reactive_by_order_var;  ///< Q_h
  };
  base::Outcome<FundamentalSet> fundamental = base::Refusal{};
};

struct WaveformResult {
  std::size_t samples = 0;
  double interval_s = 0.0;
  Window window;
  /// Refusal "no fundamental": a direct record; its channels have mean, RMS and ripple.
  base::Outcome<Fundamental> fundamental = base::Refusal{};
  std::vector<ChannelResult> channels;  ///< in the order given
  std::optional<std::size_t> voltage;   ///< which channels the power is of
  std::optional<std::size_t> current;
  base::Outcome<Power> power = base::Refusal{};
  std::vector<std::string> remarks;  ///< for a person: clipped samples, unused cycles, low sampling rate
};

/// Analyses a record: one fundamental for all channels (the voltage's when named, else the channel's with the
/// clearest one), whole cycles only, ends between samples integrated by end-corrected sums.
/// Refuses: no channel, no sample, lengths that differ, interval not positive; fewer than `least_cycles`
/// whole cycles; fewer than 8 samples a cycle; more than 1 % of a channel blank; no fundamental when
/// `alternating`. Cost: samples * (harmonics + log samples); no allocation per sample. Source: IEEE Std 1057
/// (sine fit), IEC 61000-4-7:2002 + A1:2008, IEEE Std 1459-2010.
base::Outcome<WaveformResult> analyse(const Waveform& waveform, const AnalysisSettings& settings = {});

}  // namespace loadstair::waveform
