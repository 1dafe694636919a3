#include <algorithm>
#include <cmath>

#include "analysis/base/number.h"
#include "daemon/command/capture_report.h"

namespace loadstair::command {
namespace {

constexpr double kShownShare = 0.001;  ///< of the fundamental; smaller harmonics are left to --json

using Row = std::vector<std::string>;

std::size_t width_of(const std::string& text) {
  return static_cast<std::size_t>(std::count_if(text.begin(), text.end(), [](char letter) {
    return (static_cast<unsigned char>(letter) & 0xC0U) != 0x80U;
  }));
}

/// Rows of one length; the first column to the left, the others to the right.
std::string aligned(const std::vector<Row>& rows) {
  std::vector<std::size_t> widths(rows.front().size(), 0);
  for (const auto& row : rows) {
    for (std::size_t k = 0; k < row.size(); ++k) widths[k] = std::max(widths[k], width_of(row[k]));
  }
  std::string text;
  for (const auto& row : rows) {
    for (std::size_t k = 0; k < row.size(); ++k) {
      const std::string blank(widths[k] - width_of(row[k]), ' ');
      text += k == 0 ? "  " + row[k] + blank : "  " + blank + row[k];
    }
    text.erase(text.find_last_not_of(' ') + 1);
    text += "\n";
  }
  return text;
}

std::string figure(double value, const std::string& unit = "") {
  return base::print_significant(value, 5) + (unit.empty() ? "" : " " + unit);
}

std::string figure(const waveform::Bounded& value, const std::string& unit = "") {
  return (value.lower_bound ? "\u2265 " : "") + figure(value.value, unit);
}

std::string percent(double ratio) {
  return base::print_significant(100.0 * ratio, 3) + " %";
}

/// A row of the figures' table: a label, then one figure for each channel, or "-" where there is none.
template <class Figure>
Row row_of(const std::string& label, const std::vector<waveform::ChannelResult>& channels, Figure figure_of) {
  Row row{label};
  for (const auto& channel : channels) row.push_back(figure_of(channel));
  return row;
}

std::string ratio_text(const base::Outcome<double>& ratio) {
  return ratio ? percent(*ratio) : "-";
}

bool nothing_above_floor(const waveform::ChannelResult& channel) {
  return channel.harmonics.size() > 1 && channel.orders_below_floor.size() + 1 == channel.harmonics.size();
}

/// No single harmonic stands out of the noise: then the sum of all is noise too.
std::string thd_text(const waveform::ChannelResult& channel, const base::Outcome<double>& thd) {
  return ratio_text(thd) + (thd && nothing_above_floor(channel) ? " (noise)" : "");
}

/// "2 to 12, 14, 16 to 40".
std::string orders_text(const std::vector<int>& orders) {
  std::string text;
  for (std::size_t first = 0; first < orders.size();) {
    std::size_t last = first;
    while (last + 1 < orders.size() && orders[last + 1] == orders[last] + 1) ++last;
    text += (text.empty() ? "" : ", ") + base::print_integer(orders[first]);
    if (last > first) text += (last == first + 1 ? ", " : " to ") + base::print_integer(orders[last]);
    first = last + 1;
  }
  return text;
}

/// Names the orders that are not told from noise, channel by channel.
std::string below_floor_text(const CaptureReport& report) {
  std::string text;
  const auto names = channel_names(report);
  for (std::size_t k = 0; k < names.size(); ++k) {
    const auto& channel = report.result.channels[k];
    if (channel.orders_below_floor.empty()) continue;
    text += "  " + names[k] + ": below the floor of " + base::print_significant(channel.line_floor_rms, 2) +
            (channel.unit.empty() ? "" : " " + channel.unit) + ", not told from noise: orders " +
            orders_text(channel.orders_below_floor) + "\n";
  }
  return text;
}

/// Windows of IEC 61000-4-7, or why there are none.
std::string groups_text(const CaptureReport& report) {
  const auto& channel = report.result.channels.front();
  if (!report.result.fundamental) return "";
  if (!channel.groups)
    return "  IEC 61000-4-7: " + channel.groups.refusal().reason + "; no decision by a standard\n";
  std::string text = "  IEC 61000-4-7: " + base::print_integer(channel.groups->windows) +
                     (channel.groups->windows == 1 ? " window of " : " windows of ") +
                     base::print_integer(channel.groups->cycles_per_window) + " cycles; groups with --json";
  if (!channel.standard_decision) text += "; " + channel.standard_decision.refusal().reason;
  return text + "\n";
}

std::string figures_text(const CaptureReport& report) {
  using waveform::ChannelResult;
  const auto& channels = report.result.channels;
  Row names{""};
  for (const auto& name : channel_names(report)) names.push_back(name);
  std::vector<Row> rows{std::move(names)};
  const auto add = [&](const std::string& label, auto figure_of) {
    rows.push_back(row_of(label, channels, figure_of));
  };
  add("mean", [](const ChannelResult& c) { return figure(c.mean, c.unit); });
  add("RMS", [](const ChannelResult& c) { return figure(c.rms, c.unit); });
  add("ripple RMS", [](const ChannelResult& c) { return figure(c.ripple_rms, c.unit); });
  add("peak", [](const ChannelResult& c) { return figure(c.peak, c.unit); });
  add("peak to peak", [](const ChannelResult& c) { return figure(c.peak_to_peak, c.unit); });
  add("crest factor", [](const ChannelResult& c) { return c.crest_factor ? figure(*c.crest_factor) : "-"; });
  if (channels.front().crest_band_hz > 0.0) {
    add("crest factor to " + base::print_significant(channels.front().crest_band_hz, 4) + " Hz",
        [](const ChannelResult& c) {
          return c.crest_factor_in_band ? figure(*c.crest_factor_in_band) : "-";
        });
  }
  add("form factor", [](const ChannelResult& c) { return c.form_factor ? figure(*c.form_factor) : "-"; });
  if (report.result.fundamental) {
    const std::string orders = " (orders 2 to " + base::print_integer(report.harmonics) + ")";
    add("THD_F" + orders, [](const ChannelResult& c) { return thd_text(c, c.thd_f); });
    add("THD_R" + orders, [](const ChannelResult& c) { return thd_text(c, c.thd_r); });
    add("total distortion (to " + base::print_significant(0.5 / report.result.interval_s, 3) + " Hz)",
        [](const ChannelResult& c) { return ratio_text(c.total_distortion); });
    add("THD that noise alone gives", [](const ChannelResult& c) { return percent(c.thd_floor); });
  }
  add("noise in the RMS", [](const ChannelResult& c) { return figure(c.noise_rms, c.unit); });
  if (std::any_of(channels.begin(), channels.end(),
                  [](const auto& c) { return c.quantisation_step > 0.0; })) {
    add("smallest step q (q\u00b2/12 of the RMS\u00b2)", [](const ChannelResult& c) {
      return c.quantisation_step > 0.0 ? figure(c.quantisation_step, c.unit) : "-";
    });
  }
  return aligned(rows);
}

std::string harmonics_text(const CaptureReport& report) {
  const auto& channels = report.result.channels;
  std::size_t orders = 0;
  for (const auto& channel : channels) orders = std::max(orders, channel.harmonics.size());
  if (orders == 0) return "";
  std::vector<Row> rows{{"order"}};
  for (const auto& name : channel_names(report)) rows[0].insert(rows[0].end(), {name, "share", "phase"});
  for (std::size_t k = 0; k < orders; ++k) {
    Row row{base::print_integer(static_cast<std::int64_t>(k + 1))};
    bool is_shown = false;
    for (const auto& channel : channels) {
      if (k >= channel.harmonics.size()) {
        row.insert(row.end(), {"-", "-", "-"});
        continue;
      }
      const auto& line = channel.harmonics[k];
      if (line.below_floor) {
        row.insert(row.end(), {"below floor", "-", "-"});
        continue;
      }
      is_shown = is_shown || line.share >= kShownShare;
      row.insert(row.end(), {figure(line.rms, channel.unit), percent(line.share),
                             base::print_fixed(line.phase_deg, 1) + "\u00b0"});
    }
    if (is_shown) rows.push_back(std::move(row));
  }
  return "\nHarmonics, RMS (below " + percent(kShownShare) +
         " of the fundamental only with --json; phase of the cosine at the first sample)\n" + aligned(rows) +
         below_floor_text(report) + groups_text(report);
}

std::string power_text(const waveform::Power& power) {
  std::vector<Row> rows{{"active power P", figure(power.active_w, "W")},
                        {"apparent power S", figure(power.apparent_va, "VA")},
                        {"power factor P/S", figure(power.power_factor)}};
  if (power.fundamental)
    rows.push_back({"displacement power factor", figure(power.fundamental->displacement_power_factor)});
  rows.push_back({"nonactive power N", figure(power.nonactive_var, "var")});
  rows.push_back({"ripple power, P - mean(v) mean(i)", figure(power.ripple_w, "W")});
  return "\nPower (IEEE 1459)\n" + aligned(rows);
}

}  // namespace

std::string capture_text(const CaptureReport& report) {
  const auto& result = report.result;
  std::string text = report.file + "\n";
  for (const auto& sentence : report.read.understood.sentences(report.read.samples))
    text += "  " + sentence + "\n";
  text += "\n" + base::print_integer(static_cast<std::int64_t>(result.samples)) + " samples, ";
  if (result.fundamental) {
    text += base::print_integer(result.window.cycles) +
            (result.window.cycles == 1 ? " whole cycle of " : " whole cycles of ") +
            base::print_significant(result.fundamental->frequency_hz, 6) + " Hz\n\n";
  } else {
    text += "no fundamental: the figures are over the whole record\n\n";
  }
  text += figures_text(report) + harmonics_text(report);
  if (result.power) text += power_text(*result.power);
  if (!result.remarks.empty()) text += "\n";
  for (const auto& remark : result.remarks) text += "Note: " + remark + "\n";
  return text +
         "\nUncertainty not known: the file does not say how accurate scope and probes are.\n"
         "These figures enter no efficiency and no decision.\n";
}

}  // namespace loadstair::command
