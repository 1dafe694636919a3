#include "daemon/sequencer/typed_value.h"

#include <algorithm>
#include <cmath>
#include <string_view>

#include "analysis/base/number.h"
#include "analysis/base/unit.h"
#include "daemon/sequencer/ticks.h"

namespace loadstair::sequencer {
namespace {

// Between the two rounds of one step a value moves little; more than this asks for a second look (common
// practice, no source).
constexpr double kRoundsApart = 0.2;
constexpr double kLargest = 1e12;

std::string_view trimmed(std::string_view text) {
  while (!text.empty() && (text.front() == ' ' || text.front() == '\t')) text.remove_prefix(1);
  while (!text.empty() && (text.back() == ' ' || text.back() == '\t' || text.back() == '\r'))
    text.remove_suffix(1);
  return text;
}

/// "385.2 V": the number, then the rest.
struct Split {
  std::string_view number, unit;
};
Split split(std::string_view text) {
  text = trimmed(text);
  std::size_t end = 0;
  while (end < text.size()) {
    const char c = text[end];
    const bool digit = (c >= '0' && c <= '9') || c == '.' || c == ',' || c == '+' || c == '-';
    // An exponent belongs to the number only when a digit or a sign follows.
    const bool exponent =
        (c == 'e' || c == 'E') && end > 0 && end + 1 < text.size() &&
        ((text[end + 1] >= '0' && text[end + 1] <= '9') || text[end + 1] == '-' || text[end + 1] == '+');
    if (!digit && !exponent) break;
    ++end;
  }
  return {trimmed(text.substr(0, end)), trimmed(text.substr(end))};
}

std::optional<double> number_of(std::string_view text) {
  const bool comma = text.find(',') != std::string_view::npos;
  if (comma && text.find('.') != std::string_view::npos) return std::nullopt;
  return base::parse_number(text, comma ? ',' : '.');
}

/// Weight of the last digit of a number as typed: "385.2" gives 0.1, "1.50e3" gives 10.
double weight_of_last_digit(std::string_view number) {
  const auto exponent_at = number.find_first_of("eE");
  const auto mantissa = number.substr(0, exponent_at);
  std::int64_t exponent = 0;
  if (exponent_at != std::string_view::npos) {
    exponent = base::parse_integer(number.substr(exponent_at + 1)).value_or(0);
  }
  const auto mark = mantissa.find_first_of(".,");
  if (mark != std::string_view::npos) exponent -= static_cast<std::int64_t>(mantissa.size() - mark - 1);
  // Through the printed text, so that 0.1 is the double that 0.1 is everywhere.
  return base::parse_number("1e" + base::print_integer(exponent)).value_or(1.0);
}

base::Refusal refusal(const setup::Channel& channel, std::string reason) {
  return {channel.name, std::move(reason)};
}

/// The scale of a unit as typed to the meter's base unit; empty: the meter's own.
base::Outcome<double> scale_of(const setup::Channel& channel, std::string_view unit) {
  if (unit.empty()) return 1.0;
  const auto expected = meter_unit(channel);
  if (unit == expected) return 1.0;
  const auto parsed = base::parse_unit(unit);
  if (!parsed)
    return refusal(channel, "\"" + std::string{unit} + "\" is no unit that is known; expected " + expected);
  if (parsed->unit != expected) {
    return refusal(
        channel, "the value is given in " + std::string{unit} + ", but this channel is read in " + expected);
  }
  return parsed->scale;
}

/// A positive number with or without a unit; its own unit wins over the value's.
base::Outcome<double> positive(const setup::Channel& channel, const std::string& text, std::string_view what,
                               double scale) {
  const auto parts = split(text);
  const auto number = number_of(parts.number);
  if (!number || *number <= 0.0 || *number > kLargest) {
    return refusal(channel, "the " + std::string{what} + " \"" + text + "\" is not a positive number");
  }
  if (!parts.unit.empty()) {
    const auto own = scale_of(channel, parts.unit);
    if (!own) return own.refusal();
    scale = *own;
  }
  return *number * scale;
}

}  // namespace

std::string meter_unit(const setup::Channel& channel) {
  if (channel.conversion.shunt) return "V";
  if (channel.conversion.thermocouple && !channel.conversion.thermocouple->cold_junction.empty()) return "V";
  if (channel.conversion.platinum || channel.conversion.thermistor) return "ohm";
  return channel.unit;
}

base::Outcome<TypedValue> read_typed(const setup::Channel& channel, const TypedEntry& entry) {
  const auto parts = split(entry.value);
  const auto number = number_of(parts.number);
  if (!number || std::abs(*number) > kLargest) {
    const bool comma = parts.number.find(',') != std::string_view::npos;
    return refusal(channel, "\"" + entry.value + "\" is not a number; expected one such as 385.2" +
                                (comma ? ", with a point or a comma as decimal mark, not both"
                                       : "; when the meter shows an overload, choose a higher range"));
  }
  const auto unit = trimmed(parts.unit.empty() ? std::string_view{entry.unit} : parts.unit);
  const auto scale = scale_of(channel, unit);
  if (!scale) return scale.refusal();
  TypedValue typed;
  typed.value = *number * *scale;
  typed.unit = meter_unit(channel);
  typed.text = std::string{trimmed(entry.value)};
  if (parts.unit.empty() && !entry.unit.empty()) typed.text += " " + entry.unit;
  typed.last_digit = weight_of_last_digit(parts.number) * *scale;
  if (!trimmed(entry.range).empty()) {
    const auto range = positive(channel, entry.range, "range", *scale);
    if (!range) return range.refusal();
    typed.range = *range;
  }
  if (!trimmed(entry.last_digit).empty()) {
    const auto digit = positive(channel, entry.last_digit, "last digit", *scale);
    if (!digit) return digit.refusal();
    typed.last_digit = *digit;
  }
  return typed;
}

std::string why_implausible(const setup::Channel& channel, const TypedValue& typed, double converted,
                            std::optional<double> earlier) {
  const auto printed = brief(converted) + " " + channel.unit;
  if (channel.low && converted < *channel.low) {
    return printed + " is below " + brief(*channel.low) + " " + channel.unit +
           ", the least that the hook-up file expects";
  }
  if (channel.high && converted > *channel.high) {
    return printed + " is above " + brief(*channel.high) + " " + channel.unit +
           ", the most that the hook-up file expects";
  }
  double full_scale = typed.range;
  if (full_scale == 0.0 && !channel.ranges.empty()) full_scale = channel.ranges.back().upto;
  // Many meters read up to a tenth beyond the range's name.
  if (full_scale > 0.0 && std::abs(typed.value) > 1.1 * full_scale) {
    return brief(typed.value) + " " + typed.unit + " does not fit on a range of " + brief(full_scale) + " " +
           typed.unit;
  }
  if (earlier && std::abs(typed.value - *earlier) >
                     std::max(kRoundsApart * std::abs(*earlier), 20.0 * typed.last_digit)) {
    return brief(typed.value) + " " + typed.unit + " is far from " + brief(*earlier) + " " + typed.unit +
           ", read before in this step";
  }
  return {};
}

}  // namespace loadstair::sequencer
