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
  add("form factor", [](const ChannelResult& c) { return c.form_factor ? figure(*c.form_factor) : "-"; });
  if (report.result.fundamental) {
    const std::string orders = " (orders 2 to " + base::print_integer(report.harmonics) + ")";
    add("THD_F" + orders, [](const ChannelResult& c) { return ratio_text(c.thd_f); });
    add("THD_R" + orders, [](const ChannelResult& c) { return ratio_text(c.thd_r); });
    add("total distortion (to " + base::print_significant(0.5 / report.result.interval_s, 3) + " Hz)",
        [](const ChannelResult& c) { return ratio_text(c.total_distortion); });
    add("THD that noise alone gives", [](const ChannelResult& c) { return percent(c.thd_floor); });
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
      is_shown = is_shown || line.share >= kShownShare;
      row.insert(row.end(), {figure(line.rms, channel.unit), percent(line.share),
                             base::print_fixed(line.phase_deg, 1) + "\u00b0"});
    }
    if (is_shown) rows.push_back(std::move(row));
  }
  return "\nHarmonics, RMS (below " + percent(kShownShare) +
         " of the fundamental only with --json; phase of the cosine at the first sample)\n" + aligned(rows);
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
