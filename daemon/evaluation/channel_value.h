// One channel over one step's averaging window: its value with what the meter and the conversion do to it. Of
// this room only.
#pragma once

#include <cstdint>
#include <optional>
#include <string>
#include <vector>

#include "analysis/estimate/conditions.h"
#include "analysis/estimate/estimate.h"
#include "analysis/estimate/meter.h"
#include "analysis/estimate/type_a.h"
#include "analysis/series/steady_window.h"
#include "daemon/evaluation/track.h"

namespace loadstair::evaluation {

struct BenchChecks;

/// A step's window, and what its sources are called by.
struct WindowContext {
  std::string run;   ///< part of keys
  std::string step;  ///< label, made unique within the run: part of keys and names
  std::int32_t step_index = 0;
  double from_s = 0.0, to_s = 0.0;
  std::optional<double> ambient_c;      ///< around the meters
  std::int64_t at_ns = 0;               ///< UTC: how old a calibration is
  const BenchChecks* checks = nullptr;  ///< zeros and ties that are applied; nullptr: none
  std::optional<double> steady_from_s;  ///< from when on the step is settled; nullopt: not known

  [[nodiscard]] double middle_s() const { return (from_s + to_s) / 2.0; }
  [[nodiscard]] estimate::WindowId id() const { return {run, step}; }
};

/// How often a channel was read on one of its ranges, and the mean of those readings.
struct RangePart {
  int range = kNoRange;
  double share = 0.0;  ///< of all readings of the window
  double raw = 0.0;    ///< mean, meter's unit
};

/// A channel over a window.
struct ChannelValue {
  const setup::Channel* channel = nullptr;
  /// In the channel's unit, at mid-window, with everything but Type A; refused where there is no value, or
  /// where its uncertainty is not known.
  estimate::Quoted value = base::Refusal{};
  /// The same, with what is not known left out; refused only where there is no value.
  estimate::Quoted plain = base::Refusal{};
  std::string unknown;  ///< what is not known of the uncertainty; empty when all is
  bool typed = false;
  Stretch stretch;                             ///< linked
  std::optional<series::SteadyWindow> window;  ///< linked: of the converted series
  std::vector<RangePart> parts;
  double raw = 0.0;     ///< mean, meter's unit
  double middle = 0.0;  ///< converted, at mid-window
  estimate::Estimate own{
      0.0};  ///< what the window itself adds, of value zero: instants, spread of typed rounds
  std::optional<estimate::Estimate> cold_junction;  ///< degC, of a thermocouple channel that names one
  double sensitivity = 1.0;                         ///< d value / d raw
  double deviation = 0.0;           ///< how far single readings stray within the window, channel's unit
  estimate::Conditions conditions;  ///< ambient and age of the calibration, as far as they are known
  std::vector<std::string> remarks;

  /// The range most readings were taken on; nullptr when none fits.
  [[nodiscard]] const setup::RangeSpec* range() const;
  /// The value with its Type A part, each alone; refused as `value`, or for too few readings.
  [[nodiscard]] estimate::Quoted with_noise(const WindowContext& context) const;
};

/// From the end of settling to the end of the window.
[[nodiscard]] Stretch steady_stretch(const Track& track, const WindowContext& context);
/// Whether a stretch tells more of the noise than the window that it contains.
[[nodiscard]] bool longer_than(const Stretch& steady, const Stretch& window);

/// The meter's filter and update, s: readings closer than this are not independent.
[[nodiscard]] double correlation_of(const setup::Hookup& hookup, const setup::Channel& channel);

/// index   into the hook-up file's channels, and into `tracks`
[[nodiscard]] ChannelValue channel_value(const store::StoredRun& run, const setup::Hookup& hookup,
                                         const std::vector<Track>& tracks, std::size_t index,
                                         const WindowContext& context);

/// Makes value and plain anew from the meter's error on the raw reading (a wattmeter's functions share
/// sources). raw   contributions in the meter's unit; refused where the accuracy is not known
void attach_meter_error(ChannelValue& into, const estimate::Quoted& raw);
/// The meter's error on the raw mean: for each range the share of the readings that were taken on it. Where a
/// zero was measured on that range it takes the offset's place.
[[nodiscard]] estimate::Quoted meter_error(ChannelValue& of, const setup::Hookup& hookup,
                                           const WindowContext& context);

/// The meter as the owner of its errors on one range.
[[nodiscard]] estimate::MeterRange meter_range(const setup::Channel& channel, int range);
[[nodiscard]] estimate::Occasion occasion_of(const WindowContext& context, const setup::Channel& channel);
/// Shares of the meter's variance, from the declared 24-hour repeatability where there is one.
[[nodiscard]] estimate::Shares shares_of(const setup::Hookup& hookup, const setup::Channel& channel,
                                         int range);

/// The accuracy that applies under the window's conditions, and what of it other runs have in common.
struct MeterNow {
  estimate::MeterRange meter;
  estimate::Shares shares;
};
[[nodiscard]] MeterNow meter_now(const ChannelValue& of, const RangePart& part, const setup::Hookup& hookup);

/// Name of what a channel's resistance to the circuit is: its shunt, or its meter on a range.
[[nodiscard]] std::string burden_name(const setup::Channel& channel, int range);

}  // namespace loadstair::evaluation
