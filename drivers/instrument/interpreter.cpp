#include "drivers/instrument/interpreter.h"

#include <algorithm>
#include <limits>
#include <span>

#include "analysis/base/number.h"
#include "analysis/base/require.h"
#include "drivers/dialect/scpi.h"
#include "drivers/dialect/text.h"

namespace loadstair::instrument {
namespace {

using dialect::Field;
using dialect::Quality;

constexpr double kNoNumber = std::numeric_limits<double>::quiet_NaN();

// A form of number is believed when it makes up this share of about the last 32 replies: after three in a
// row. The first reply ever sets the standard with little weight. Common practice, no source.
constexpr double kShareOfOne = 1.0 / 32.0;
constexpr double kBelievedShare = 0.08;
constexpr double kFirstShare = 0.1;
// A range may change the decimals; nothing but a cut takes the exponent away.
constexpr double kBelievedWithoutExponent = 0.5;

std::int64_t ns_of(double seconds) {
  return static_cast<std::int64_t>(seconds * 1e9);
}

std::uint32_t flag_of(Quality quality) {
  switch (quality) {
    case Quality::good:
      return 0;
    case Quality::overload:
      return kOverload;
    case Quality::invalid:
    case Quality::not_a_number:
      return kInvalid;
    case Quality::unit_changed:
      return kUnitChanged;
  }
  return kInvalid;
}

int index_of(const Profile& profile, const std::string& name) {
  if (name.empty()) return -1;
  const auto found = std::find_if(profile.values.begin(), profile.values.end(),
                                  [&name](const ProfileValue& value) { return value.name == name; });
  base::require(found != profile.values.end(), "a query's values are values of the profile");
  return static_cast<int>(found - profile.values.begin());
}

}  // namespace

Interpreter::Interpreter(const Profile& profile, const InstrumentSettings& settings, Tell tell)
    : profile_{profile},
      tell_{std::move(tell)},
      rules_{profile.overload_words, profile.overload_at},
      age_ns_{ns_of(settings.delay_s) + ns_of(settings.integration_s) / 2},
      half_update_ns_{profile.free_running ? ns_of(settings.update_s) / 2 : 0} {
  const bool polled = profile.dialect == Dialect::scpi;
  const auto conversion_ns = ns_of(std::max(settings.update_s, polled ? settings.poll_s : 0.0));
  for (const auto& value : profile.values) {
    values_.push_back({value.unit, Quality::good, false, {}, StuckWatch{conversion_ns}});
    if (polled) continue;
    auto pattern = dialect::LinePattern::parse(value.line_pattern);
    base::require(pattern.ok(), "the line patterns of a profile are sound");
    patterns_.push_back(std::move(*pattern));
  }
  for (const auto& query : profile.queries) {
    auto& indices = query_values_.emplace_back();
    for (const auto& name : query.values) indices.push_back(index_of(profile, name));
  }
}

// A free-running meter answers with the last finished conversion, which is between nothing and a whole update
// period old: the middle of that range goes into the instant, half its length into the half-width.
Instant Interpreter::instant_of_reply(std::int64_t sent_ns, std::int64_t first_ns) const {
  const auto half_ns = (first_ns - sent_ns) / 2;
  return {sent_ns + half_ns - age_ns_ - half_update_ns_, half_ns + half_update_ns_};
}

Instant Interpreter::instant_of_line(std::int64_t first_ns, std::int64_t last_ns) const {
  return {first_ns - age_ns_, (last_ns - first_ns) / 2 + half_update_ns_};
}

bool Interpreter::has_known_shape(Value& value, std::string_view element) {
  const bool first = value.shapes.empty();
  for (auto& [shape, share] : value.shapes) share *= 1.0 - kShareOfOne;
  std::erase_if(value.shapes, [](const auto& entry) { return entry.second < kShareOfOne / 32.0; });
  const auto shape = dialect::shape_of(element);
  auto& share = value.shapes[shape];
  share += first ? kFirstShare : kShareOfOne;
  const auto most = std::max_element(value.shapes.begin(), value.shapes.end(),
                                     [](const auto& a, const auto& b) { return a.second < b.second; });
  const bool lacks_exponent = shape.exponent_digits < most->first.exponent_digits;
  return share >= (lacks_exponent ? kBelievedWithoutExponent : kBelievedShare);
}

void Interpreter::tell_change(const ProfileValue& profile, Value& value, const Field& field) {
  if (field.quality == value.quality) return;
  value.quality = field.quality;
  switch (field.quality) {
    case Quality::good:
      return;
    case Quality::overload:
      tell_(EventKind::overload, profile.name + ": overload; choose a higher range");
      return;
    case Quality::unit_changed:
      tell_(EventKind::unit_changed, profile.name + ": " + field.why + "; was a knob turned?");
      return;
    case Quality::invalid:
    case Quality::not_a_number:
      tell_(EventKind::garbage, profile.name + ": " + field.why);
      return;
  }
}

Reading Interpreter::judge(std::size_t index, const Field& field, Instant instant) {
  auto& value = values_[index];
  tell_change(profile_.values[index], value, field);
  Reading reading;
  reading.value_index = static_cast<std::int32_t>(index);
  reading.t_ns = instant.t_ns;
  reading.half_width_ns = instant.half_width_ns;
  reading.flags = flag_of(field.quality);
  const bool number = field.quality == Quality::good || field.quality == Quality::unit_changed;
  reading.value = number ? field.value : kNoNumber;
  if (field.quality != Quality::good || !profile_.free_running) return reading;

  const bool stuck = value.watch.observe(field.value, instant.t_ns);
  if (stuck) reading.flags |= kStale;
  if (stuck && !value.stuck) {
    tell_(EventKind::stale,
          profile_.values[index].name +
              ": the same value again and again, where it was restless before; is it on hold?");
  }
  value.stuck = stuck;
  return reading;
}

Interpreter::Reply Interpreter::read_reply(std::size_t query, const std::string& text, Instant instant) {
  const auto& indices = query_values_[query];
  std::vector<std::string> units;
  for (const int index : indices)
    units.push_back(index < 0 ? "" : values_[static_cast<std::size_t>(index)].unit);
  auto fields = dialect::read_reply(text, units, rules_);
  const auto elements = dialect::split_reply(text);

  Reply reply;
  for (std::size_t i = 0; i < indices.size(); ++i) {
    if (indices[i] < 0) continue;
    const auto index = static_cast<std::size_t>(indices[i]);
    auto& field = fields[i];
    if (field.quality == Quality::good && !has_known_shape(values_[index], elements[i])) {
      field = {Quality::invalid,
               0.0,
               {},
               "'" + dialect::printable(elements[i]) + "' has another form than before; cut short?"};
    }
    // Who says "not a number" has answered; anything else without a number may be another query's reply.
    if (field.quality == Quality::invalid) reply.readable = false;
    reply.readings.push_back(judge(index, field, instant));
  }
  return reply;
}

std::vector<Reading> Interpreter::absent(std::size_t query, Instant instant, Flag flag) const {
  std::vector<Reading> readings;
  for (const int index : query_values_[query]) {
    if (index >= 0) readings.push_back({index, instant.t_ns, instant.half_width_ns, kNoNumber, flag, 0.0});
  }
  return readings;
}

std::vector<Reading> Interpreter::read_line(const std::string& text, Instant instant) {
  std::vector<Reading> readings;
  for (std::size_t index = 0; index < patterns_.size(); ++index) {
    const auto field = patterns_[index].read(text, values_[index].unit, rules_);
    if (!field) continue;
    values_[index].seen_ns = instant.t_ns;
    values_[index].silent = false;
    readings.push_back(judge(index, *field, instant));
  }
  const bool strange = readings.empty();
  if (strange && values_.size() == 1) {
    // Only one value can have been meant.
    const Field field{Quality::invalid,
                      0.0,
                      {},
                      "the line '" + dialect::printable(text) + "' does not look like '" +
                          profile_.values[0].line_pattern + "'"};
    readings.push_back(judge(0, field, instant));
  } else if (strange && !strange_lines_) {
    tell_(EventKind::garbage,
          "the line '" + dialect::printable(text) + "' looks like no pattern of the profile");
  }
  strange_lines_ = strange;
  return readings;
}

std::vector<Reading> Interpreter::silent_values(std::int64_t now_ns, std::int64_t limit_ns) {
  std::vector<Reading> readings;
  for (std::size_t index = 0; index < values_.size(); ++index) {
    auto& value = values_[index];
    if (!profile_.values[index].expected || value.silent || now_ns - value.seen_ns < limit_ns) continue;
    value.silent = true;
    readings.push_back(
        {static_cast<std::int32_t>(index), now_ns - age_ns_, half_update_ns_, kNoNumber, kMissing, 0.0});
    tell_(EventKind::timeout, profile_.values[index].name + ": no line for " +
                                  dialect::write_number(static_cast<double>(limit_ns) / 1e9) +
                                  " s; is it on, and does it send?");
  }
  return readings;
}

std::vector<Reading> Interpreter::all_missing(std::int64_t now_ns) const {
  std::vector<Reading> readings;
  for (std::size_t index = 0; index < values_.size(); ++index) {
    readings.push_back(
        {static_cast<std::int32_t>(index), now_ns - age_ns_, half_update_ns_, kNoNumber, kMissing, 0.0});
  }
  return readings;
}

void Interpreter::begin(std::int64_t now_ns) {
  for (auto& value : values_) {
    value.seen_ns = now_ns;
    value.silent = false;
  }
}

}  // namespace loadstair::instrument
