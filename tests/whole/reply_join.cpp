#include "whole/reply_join.h"

#include <algorithm>
#include <charconv>
#include <cmath>
#include <map>
#include <optional>
#include <string_view>

#include "analysis/base/number.h"

namespace loadstair::whole {
namespace {

using rehearsal::LogEntry;

constexpr std::int64_t kReach_ns = 3'000'000'000;
// The identity is asked for twice, with 2 s of patience each, before a stranger is called one.
constexpr std::int64_t kReachOfIdentity_ns = 5'000'000'000;
// A line waits while those before it are on the wire: six of 12 bytes at 9600 baud, after one that was late.
constexpr std::int64_t kLineWait_ns = 80'000'000;
// One multiplication by a prefix, whichever way round it is done.
constexpr double kRounding = 1e-15;

std::string at(std::int64_t t_ns, const store::StoredRun& run) {
  return base::print_fixed(static_cast<double>(t_ns - run.summary.started_ns) * 1e-9, 4) + " s";
}

/// "+16.3215 mV DC": the number, and what follows it. Nothing where there is no number.
struct Number {
  double value = 0.0;
  std::string_view rest;
};
std::optional<Number> leading_number(std::string_view text) {
  if (text.starts_with('+')) text.remove_prefix(1);
  Number number;
  const auto [end, error] = std::from_chars(text.data(), text.data() + text.size(), number.value);
  if (error != std::errc{}) return std::nullopt;
  number.rest = text.substr(static_cast<std::size_t>(end - text.data()));
  return number;
}

std::optional<double> field_value(std::string_view reply, std::size_t place) {
  for (; place > 0; --place) {
    const auto comma = reply.find(',');
    if (comma == std::string_view::npos) return std::nullopt;
    reply.remove_prefix(comma + 1);
  }
  const auto number = leading_number(reply.substr(0, reply.find(',')));
  if (!number || !number->rest.empty()) return std::nullopt;
  return number->value;
}

std::optional<double> line_value(std::string_view line, const std::string& value_name) {
  if (line.starts_with(value_name + " ")) line.remove_prefix(value_name.size() + 1);
  const auto number = leading_number(line);
  if (!number) return std::nullopt;
  static const std::map<std::string_view, double> kUnits = {
      {" mV DC", 1e-3}, {" V DC", 1.0}, {" mA DC", 1e-3}, {" A DC", 1.0}, {" C", 1.0}};
  const auto unit = kUnits.find(number->rest);
  if (unit == kUnits.end()) return std::nullopt;
  return number->value * unit->second;
}

bool same(double a, double b) {
  return std::abs(a - b) <= kRounding * std::abs(b);
}

/// What the record may show of a fault.
struct Signs {
  std::uint32_t flags = 0;
  std::vector<std::string> events;
  bool alters = false;  ///< a reading taken from such a reply is wrong
};

const std::map<std::string, Signs>& signs_of_faults() {
  static const std::map<std::string, Signs> signs = {
      {"silence", {instrument::kMissing, {"timeout", "lost"}, true}},
      {"late", {instrument::kMissing, {"timeout", "lost", "garbage", "resynchronised"}, false}},
      {"garbage", {instrument::kInvalid, {"garbage", "lost"}, true}},
      {"truncated", {instrument::kInvalid, {"garbage", "lost", "identity wrong"}, true}},
      {"duplicate", {0, {"garbage", "resynchronised"}, false}},
      {"stale", {instrument::kStale, {"stale"}, false}},
      {"overload", {instrument::kOverload, {"overload"}, true}},
      {"unit_change", {instrument::kUnitChanged, {"unit changed"}, true}},
      {"wrong_identity", {0, {"identity wrong"}, true}},
      {"vanish", {instrument::kMissing, {"lost"}, false}},
  };
  return signs;
}

class Joiner {
 public:
  Joiner(const VirtualRun& run, const setup::Hookup& hookup) : run_{run}, hookup_{hookup} {
    for (const auto& reply : run.replies) replies_[reply.id] = &reply;
    for (const auto& entry : run.log) sent_[entry.instrument].push_back(&entry);
    for (const auto& channel : run.stored.channels) {
      if (channel.entry.instrument.empty()) continue;
      auto& seen = seen_[channel.entry.instrument];
      for (std::size_t i = 0; i < channel.t_ns.size(); ++i)
        seen.push_back({channel.t_ns[i], channel.flags[i] & instrument::kUnusable});
    }
    for (auto& [name, seen] : seen_)
      std::sort(seen.begin(), seen.end(), [](const Seen& a, const Seen& b) { return a.t_ns < b.t_ns; });
  }

  ReplyJoin join() {
    for (const auto& channel : run_.stored.channels) {
      if (channel.entry.instrument.empty()) continue;
      for (std::size_t i = 0; i < channel.t_ns.size(); ++i) {
        if ((channel.flags[i] & instrument::kUnusable) == 0U) check_reading(channel, i);
      }
    }
    for (const auto& answer : run_.stored.typed) {
      if ((answer.flags & instrument::kUnusable) == 0U) check_typed(answer);
    }
    for (const auto& [name, entries] : sent_) check_faults(name, entries);
    return std::move(found_);
  }

 private:
  struct Seen {
    std::int64_t t_ns = 0;
    std::uint32_t unusable = 0;
  };
  using Entries = std::vector<const LogEntry*>;

  [[nodiscard]] std::string said(const LogEntry& entry) const {
    return entry.instrument + " sent \"" + entry.reply + "\" to \"" + entry.query + "\" at " +
           at(entry.sent_wall_ns, run_.stored) + (entry.fault.empty() ? "" : " (" + entry.fault + ")");
  }

  /// The entries of the log from one instant to another, both inclusive.
  [[nodiscard]] std::pair<Entries::const_iterator, Entries::const_iterator> between(
      const std::string& instrument, std::int64_t from_ns, std::int64_t to_ns) {
    const Entries& entries = sent_[instrument];
    const auto first =
        std::lower_bound(entries.begin(), entries.end(), from_ns,
                         [](const LogEntry* entry, std::int64_t t_ns) { return entry->sent_wall_ns < t_ns; });
    const auto last =
        std::upper_bound(first, entries.end(), to_ns,
                         [](std::int64_t t_ns, const LogEntry* entry) { return t_ns < entry->sent_wall_ns; });
    return {first, last};
  }

  /// What the rehearsal says it sent as this reply; nullptr: nothing.
  [[nodiscard]] const LogEntry* source_of(const store::StoredReply& reply) {
    const bool line = reply.query.empty();
    const auto [first, last] = between(reply.instrument, line ? reply.sent_ns - kLineWait_ns : reply.sent_ns,
                                       line ? reply.sent_ns : reply.received_ns);
    const LogEntry* found = nullptr;
    for (auto entry = first; entry != last; ++entry) {
      if (line ? (*entry)->kind == "line" && (*entry)->reply == reply.text
               : (*entry)->kind == "reply" && (*entry)->query == reply.query)
        found = *entry;
    }
    return found;
  }

  [[nodiscard]] std::optional<double> value_in(const store::StoredReply& reply,
                                               const store::ChannelEntry& channel) const {
    if (reply.query.empty()) return line_value(reply.text, channel.value);
    const auto* instrument = hookup_.find_instrument(channel.instrument);
    if (instrument == nullptr) return std::nullopt;
    for (const auto& query : instrument->profile.queries) {
      const auto place = std::find(query.values.begin(), query.values.end(), channel.value);
      if (query.text != reply.query || place == query.values.end()) continue;
      return field_value(reply.text, static_cast<std::size_t>(place - query.values.begin()));
    }
    return std::nullopt;
  }

  void check_reading(const store::StoredChannel& channel, std::size_t i) {
    ++found_.good_readings;
    const auto wrong = [&](const std::string& why) {
      found_.wrong.push_back(channel.entry.name + " = " + base::print_number(channel.value[i]) + " at " +
                             at(channel.t_ns[i], run_.stored) + ": " + why);
    };
    const auto stored = replies_.find(channel.reply[i]);
    if (stored == replies_.end()) return wrong("has no stored reply");
    const auto& reply = *stored->second;
    if (reply.instrument != channel.entry.instrument) return wrong("its reply is one of " + reply.instrument);
    const LogEntry* source = source_of(reply);
    if (source == nullptr)
      return wrong("nobody sent \"" + reply.text + "\" in answer to \"" + reply.query + "\"");
    if (source->reply != reply.text)
      return wrong("the record has \"" + reply.text + "\", but " + said(*source));
    const auto value = value_in(reply, channel.entry);
    if (!value) return wrong("there is no such value in \"" + reply.text + "\"");
    if (!same(channel.value[i], *value)) return wrong("\"" + reply.text + "\" says something else");
    const auto* declared = hookup_.find_instrument(channel.entry.instrument);
    const double oldest_s = declared->delay_s + declared->integration_s + declared->update_s;
    if (channel.t_ns[i] > reply.received_ns ||
        channel.t_ns[i] < reply.sent_ns - static_cast<std::int64_t>(oldest_s * 1e9))
      return wrong("its instant does not fit its reply, from " + at(reply.sent_ns, run_.stored) + " to " +
                   at(reply.received_ns, run_.stored));
    const auto signs = signs_of_faults().find(source->fault);
    if (signs != signs_of_faults().end() && signs->second.alters)
      hide(*source, "a good reading of " + channel.entry.name + " was made of it");
  }

  void check_typed(const store::StoredTypedAnswer& answer) {
    ++found_.typed_values;
    const auto& name = run_.stored.channels[static_cast<std::size_t>(answer.channel)].entry.name;
    for (const auto& [instrument, entries] : sent_) {
      const auto [first, last] = between(instrument, answer.prompted_ns, answer.entered_ns);
      for (auto entry = first; entry != last; ++entry) {
        if ((*entry)->kind != "typed" || (*entry)->query != name) continue;
        const auto number = leading_number((*entry)->reply);
        if (number && same(answer.value, number->value)) return;
      }
    }
    found_.wrong.push_back(name + " typed \"" + answer.text + "\" from " +
                           at(answer.prompted_ns, run_.stored) + " to " + at(answer.entered_ns, run_.stored) +
                           ": no display showed that then");
  }

  void hide(const LogEntry& entry, const std::string& why) {
    found_.hidden.push_back({entry.instrument, entry.fault, said(entry) + ": " + why});
  }

  /// A fault that only alters measured values leaves every other reply as it is.
  [[nodiscard]] bool is_touched(const LogEntry& entry) const {
    if (entry.kind == "line" || (entry.fault != "overload" && entry.fault != "unit_change")) return true;
    const auto* instrument = hookup_.find_instrument(entry.instrument);
    return instrument != nullptr &&
           std::any_of(instrument->profile.queries.begin(), instrument->profile.queries.end(),
                       [&](const auto& query) { return query.text == entry.query; });
  }

  [[nodiscard]] bool shows(const LogEntry& entry, const Signs& signs) const {
    const auto reach_ns = entry.fault == "wrong_identity" ? kReachOfIdentity_ns : kReach_ns;
    const auto near = [&](std::int64_t t_ns) { return std::abs(t_ns - entry.sent_wall_ns) <= reach_ns; };
    const auto seen = seen_.find(entry.instrument);
    if (seen != seen_.end() && std::any_of(seen->second.begin(), seen->second.end(), [&](const Seen& one) {
          return (one.unusable & signs.flags) != 0U && near(one.t_ns);
        }))
      return true;
    const auto& events = run_.stored.events;
    return std::any_of(events.begin(), events.end(), [&](const store::StoredEvent& event) {
      return event.source == entry.instrument && near(event.t_ns) &&
             std::find(signs.events.begin(), signs.events.end(), event.kind) != signs.events.end();
    });
  }

  [[nodiscard]] bool good_between(const std::string& instrument, std::int64_t from_ns,
                                  std::int64_t to_ns) const {
    const auto seen = seen_.find(instrument);
    return seen != seen_.end() && std::any_of(seen->second.begin(), seen->second.end(), [&](const Seen& one) {
             return one.unusable == 0U && one.t_ns > from_ns && one.t_ns < to_ns;
           });
  }

  void check_faults(const std::string& instrument, const Entries& entries) {
    const LogEntry* shown = nullptr;  // the last one that shows
    for (const LogEntry* entry : entries) {
      const auto signs = signs_of_faults().find(entry->fault);
      if (signs == signs_of_faults().end() || entry->kind == "typed" || !is_touched(*entry)) continue;
      if (entry->sent_wall_ns < run_.stored.summary.started_ns ||
          entry->sent_wall_ns > run_.stored.summary.ended_ns.value_or(INT64_MAX))
        continue;
      ++found_.faults;
      const bool goes_on = shown != nullptr && shown->fault == entry->fault &&
                           !good_between(instrument, shown->sent_wall_ns, entry->sent_wall_ns);
      if (goes_on || shows(*entry, signs->second)) {
        shown = entry;
      } else {
        hide(*entry, "nothing in the record tells of it");
      }
    }
  }

  const VirtualRun& run_;
  const setup::Hookup& hookup_;
  std::map<std::int64_t, const store::StoredReply*> replies_;
  std::map<std::string, Entries> sent_;            ///< by instrument, in the order of time
  std::map<std::string, std::vector<Seen>> seen_;  ///< the record's readings by instrument, in order of time
  ReplyJoin found_;
};

}  // namespace

std::string ReplyJoin::text() const {
  std::string text;
  for (const auto& line : wrong) text += "wrong: " + line + "\n";
  for (const auto& fault : hidden) text += "hidden " + fault.kind + ": " + fault.text + "\n";
  return text;
}

ReplyJoin join_replies(const VirtualRun& run, const setup::Hookup& hookup) {
  return Joiner{run, hookup}.join();
}

}  // namespace loadstair::whole
