#include <cmath>
#include <nlohmann/json.hpp>

#include "analysis/base/number.h"
#include "daemon/command/capture_report.h"

namespace loadstair::command {
namespace {

using Json = nlohmann::ordered_json;

/// Nothing is declared of a file's scope and probes, so no figure of it has an interval (docs/methods.md,
/// section 3).
constexpr const char* kNotKnown = "uncertainty not known";

Json refused(const std::string& why) {
  return {{"value", nullptr}, {"why", why}};
}

Json number(double value) {
  return std::isfinite(value) ? Json(value) : refused("not a finite number");
}

Json number(const base::Outcome<double>& outcome) {
  return outcome ? number(*outcome) : refused(outcome.refusal().text());
}

Json number(const base::Outcome<waveform::Bounded>& outcome) {
  return outcome ? number(outcome->value) : refused(outcome.refusal().text());
}

Json harmonics_json(const waveform::ChannelResult& channel) {
  Json list = Json::array();
  for (const auto& line : channel.harmonics) {
    list.push_back({{"order", line.order},
                    {"frequency_hz", number(line.frequency_hz)},
                    {"rms", number(line.rms)},
                    {"share", number(line.share)},
                    {"phase_deg", number(line.phase_deg)},
                    {"below_floor", line.below_floor}});
  }
  return list;
}

Json smoothed_json(const base::Outcome<std::vector<waveform::SmoothedOrder>>& smoothed) {
  if (!smoothed) return refused(smoothed.refusal().text());
  Json orders = Json::array();
  for (const auto& order : *smoothed) {
    orders.push_back({{"order", order.order},
                      {"group_rms", number(order.group_rms)},
                      {"group_rms_high", number(order.group_rms_high)},
                      {"subgroup_rms", number(order.subgroup_rms)},
                      {"subgroup_rms_high", number(order.subgroup_rms_high)}});
  }
  return orders;
}

Json groups_json(const base::Outcome<waveform::GroupedHarmonics>& groups) {
  if (!groups) return refused(groups.refusal().text());
  Json orders = Json::array();
  for (const auto& order : groups->orders) {
    orders.push_back({{"order", order.order},
                      {"group_rms", number(order.group_rms)},
                      {"group_rms_low", number(order.group_rms_low)},
                      {"group_rms_high", number(order.group_rms_high)},
                      {"subgroup_rms", number(order.subgroup_rms)},
                      {"subgroup_rms_low", number(order.subgroup_rms_low)},
                      {"subgroup_rms_high", number(order.subgroup_rms_high)},
                      {"interharmonic_rms", number(order.interharmonic_rms)}});
  }
  return {{"cycles_per_window", groups->cycles_per_window},
          {"windows", groups->windows},
          {"synchronisation", number(groups->synchronisation)},
          {"smoothed", smoothed_json(groups->smoothed)},
          {"thd_group", number(groups->thd_group)},
          {"thd_subgroup", number(groups->thd_subgroup)},
          {"orders", std::move(orders)}};
}

/// Names of the figures that are lower bounds, since samples were clipped: to be printed with a sign of "at
/// least".
Json at_least(const waveform::ChannelResult& channel) {
  Json names = Json::array();
  const auto add = [&names](const char* name, const waveform::Bounded& value) {
    if (value.lower_bound) names.push_back(name);
  };
  add("rms", channel.rms);
  add("ripple_rms", channel.ripple_rms);
  add("peak", channel.peak);
  add("peak_to_peak", channel.peak_to_peak);
  if (channel.crest_factor) add("crest_factor", *channel.crest_factor);
  if (channel.crest_factor_in_band) add("crest_factor_in_band", *channel.crest_factor_in_band);
  return names;
}

Json channel_json(const waveform::ChannelResult& channel) {
  return {{"unit", channel.unit},
          {"mean", number(channel.mean)},
          {"rms", number(channel.rms.value)},
          {"ripple_rms", number(channel.ripple_rms.value)},
          {"minimum", number(channel.minimum)},
          {"maximum", number(channel.maximum)},
          {"peak", number(channel.peak.value)},
          {"peak_to_peak", number(channel.peak_to_peak.value)},
          {"mean_rectified", number(channel.mean_rectified)},
          {"crest_factor", number(channel.crest_factor)},
          {"crest_factor_in_band", number(channel.crest_factor_in_band)},
          {"crest_band_hz", number(channel.crest_band_hz)},
          {"form_factor", number(channel.form_factor)},
          {"thd_f", number(channel.thd_f)},
          {"thd_r", number(channel.thd_r)},
          {"thd_floor", number(channel.thd_floor)},
          {"total_distortion", number(channel.total_distortion)},
          {"total_distortion_band_hz", number(channel.total_distortion_band_hz)},
          {"line_floor_rms", number(channel.line_floor_rms)},
          {"orders_below_floor", channel.orders_below_floor},
          {"residual_rms", number(channel.residual_rms)},
          {"noise_rms", number(channel.noise_rms)},
          {"quantisation_step", number(channel.quantisation_step)},
          {"missing", channel.missing},
          {"at_least", at_least(channel)},
          {"harmonics", harmonics_json(channel)},
          {"groups", groups_json(channel.groups)},
          {"standard_decision",
           channel.standard_decision ? Json(true) : refused(channel.standard_decision.refusal().text())}};
}

Json power_json(const base::Outcome<waveform::Power>& power) {
  if (!power) return refused(power.refusal().text());
  Json all = {{"active_w", number(power->active_w)},
              {"apparent_va", number(power->apparent_va)},
              {"power_factor", number(power->power_factor)},
              {"nonactive_var", number(power->nonactive_var)},
              {"ripple_w", number(power->ripple_w)}};
  if (!power->fundamental) {
    all["displacement_power_factor"] = refused(power->fundamental.refusal().text());
    return all;
  }
  const auto& set = *power->fundamental;
  all["displacement_power_factor"] = number(set.displacement_power_factor);
  all["fundamental"] = {{"phase_deg", number(set.phase_deg)},
                        {"active_w", number(set.active_w)},
                        {"reactive_var", number(set.reactive_var)},
                        {"apparent_va", number(set.apparent_va)}};
  all["harmonic_active_w"] = number(set.harmonic_active_w);
  all["nonfundamental_va"] = number(set.nonfundamental_va);
  all["current_distortion_var"] = number(set.current_distortion_var);
  all["voltage_distortion_var"] = number(set.voltage_distortion_var);
  all["harmonic_apparent_va"] = number(set.harmonic_apparent_va);
  all["harmonic_distortion_var"] = number(set.harmonic_distortion_var);
  return all;
}

Json estimates_json(const CaptureReport& report, const std::vector<std::string>& names) {
  Json all;
  all["frequency_hz"] = refused(kNotKnown);
  all["channels"] = Json::object();
  for (const auto& name : names) {
    Json& channel = all["channels"][name];
    for (const char* figure : {"mean", "rms", "ripple_rms", "peak", "crest_factor", "form_factor", "thd_f"}) {
      channel[figure] = refused(kNotKnown);
    }
  }
  if (!report.result.power) return all;
  for (const char* figure :
       {"active_w", "apparent_va", "power_factor", "displacement_power_factor", "nonactive_var"}) {
    all["power"][figure] = refused(kNotKnown);
  }
  return all;
}

}  // namespace

std::vector<std::string> channel_names(const CaptureReport& report) {
  std::vector<std::string> names;
  const auto& channels = report.result.channels;
  for (std::size_t k = 0; k < channels.size(); ++k) {
    std::string name = channels[k].name;
    for (std::size_t other = 0; other < channels.size(); ++other) {
      if (other == k || channels[other].name != channels[k].name) continue;
      name += " (column " +
              base::print_integer(static_cast<std::int64_t>(report.read.understood.channel_columns[k])) + ")";
      break;
    }
    names.push_back(std::move(name));
  }
  return names;
}

nlohmann::ordered_json capture_json(const CaptureReport& report) {
  const auto& result = report.result;
  const auto names = channel_names(report);
  Json all;
  all["file"] = report.file;
  all["samples"] = result.samples;
  all["interval_s"] = number(result.interval_s);
  all["cycles"] = result.window.cycles;
  all["frequency_hz"] = result.fundamental ? number(result.fundamental->frequency_hz)
                                           : refused(result.fundamental.refusal().text());
  all["channels"] = Json::object();
  for (std::size_t k = 0; k < names.size(); ++k) all["channels"][names[k]] = channel_json(result.channels[k]);
  all["power"] = power_json(result.power);
  all["estimates"] = estimates_json(report, names);
  all["understood"] = report.read.understood.sentences(report.read.samples);
  all["remarks"] = result.remarks;
  return all;
}

}  // namespace loadstair::command
