// What must hold for any bytes that come as a scope's CSV export. Used by the fuzz target and by the replay
// of its corpus.
#pragma once

#include <bit>
#include <cmath>
#include <cstdint>
#include <string>
#include <string_view>

#include "analysis/base/number.h"
#include "drivers/scope_csv/csv_text.h"
#include "drivers/scope_csv/plain_twin.h"
#include "drivers/scope_csv/scope_csv.h"

namespace loadstair::fuzz {

inline bool same_bits(double a, double b) {
  return (std::isnan(a) && std::isnan(b)) ||
         std::bit_cast<std::uint64_t>(a) == std::bit_cast<std::uint64_t>(b);
}

inline std::string different(const scope_csv::Samples& a, const scope_csv::Samples& b) {
  if (a.columns.size() != b.columns.size()) return "another number of channels";
  if (!same_bits(a.interval_s, b.interval_s)) return "another interval";
  for (std::size_t k = 0; k < a.columns.size(); ++k) {
    const auto& left = a.columns[k];
    const auto& right = b.columns[k];
    if (left.values.size() != right.values.size()) return "another number of samples";
    for (std::size_t row = 0; row < left.values.size(); ++row) {
      if (!same_bits(left.values[row], right.values[row])) return "another value";
    }
  }
  return {};
}

/// The channels behind a count of rows, every value printed in full.
inline std::string printed(const scope_csv::Samples& samples) {
  std::string text = "no";
  for (std::size_t k = 0; k < samples.columns.size(); ++k) text += ";c";
  for (std::size_t row = 0; row < samples.columns[0].values.size(); ++row) {
    text += '\n' + base::print_integer(static_cast<std::int64_t>(row));
    for (const auto& column : samples.columns) text += ';' + base::print_number(column.values[row]);
  }
  return text + '\n';
}

/// Returns: what does not hold, or an empty string.
inline std::string broken_by_scope_csv(std::string_view bytes) {
  using namespace scope_csv;
  const auto fast = read_scope_csv(bytes, "f.csv");
  const auto plain = read_scope_csv_plainly(bytes, "f.csv");
  if (fast.ok() != plain.ok()) return "only one of the fast and the plain way refuses";
  const auto is_clean = [](std::string_view text) { return clean_text(text) == text; };
  if (!fast) {
    if (fast.refusal() != plain.refusal()) return "the fast and the plain way refuse differently";
    if (!fast.refusal().place.starts_with("f.csv:")) return "a refusal without a place in the file";
    return is_clean(fast.refusal().text()) ? "" : "a refusal that is no clean text";
  }
  const Samples& samples = fast->samples;
  if (auto what = different(samples, plain->samples); !what.empty()) return "the plain way gives " + what;
  if (!(samples.interval_s > 0.0) || !std::isfinite(samples.start_s)) return "no time";
  if (samples.columns.empty() || fast->understood.rows < 2) return "nothing read";
  for (std::size_t k = 0; k < samples.columns.size(); ++k) {
    const auto& column = samples.columns[k];
    const auto& twin = plain->samples.columns[k];
    if (!is_clean(column.name) || !is_clean(column.unit)) return "a name that is no clean text";
    if (column.values.size() != fast->understood.rows) return "a channel of another length";
    std::size_t missing = 0;
    for (const double value : column.values) {
      if (std::isinf(value)) return "an infinity among the values";
      missing += std::isnan(value) ? 1 : 0;
    }
    if (missing != column.clipped_high + column.clipped_low + column.blank) return "miscounted samples";
    if (column.blank != twin.blank || column.clipped_high != twin.clipped_high)
      return "the ways count differently";
  }
  for (const auto& sentence : fast->understood.sentences(samples)) {
    if (!is_clean(sentence)) return "a sentence that is no clean text";
  }
  Options options;
  options.separator = ';';
  options.decimal_mark = '.';
  options.header_line = 1;
  options.unit_line = 0;
  options.data_line = 2;
  options.interval_s = samples.interval_s;
  const auto again = read_scope_csv(printed(samples), "f.csv", options);
  if (!again) return "what was read is refused when printed: " + again.refusal().text();
  if (auto what = different(samples, again->samples); !what.empty())
    return "printed and read again gives " + what;
  return {};
}

}  // namespace loadstair::fuzz
