#include "daemon/service/state_json.h"

#include <cmath>
#include <nlohmann/json.hpp>
#include <string>

#include "daemon/service/result_json.h"

namespace loadstair::service {
namespace {

using nlohmann::json;

template <class T>
json maybe(const std::optional<T>& value) {
  return value ? json(*value) : json(nullptr);
}

json prompt_json(const sequencer::OpenPrompt& prompt) {
  return {{"id", prompt.id},           {"kind", std::string{sequencer::name_of(prompt.kind)}},
          {"text", prompt.text},       {"cautions", prompt.cautions},
          {"channel", prompt.channel}, {"unit", prompt.unit},
          {"round", prompt.round},     {"rounds", prompt.rounds},
          {"low", maybe(prompt.low)},  {"high", maybe(prompt.high)},
          {"ranges", prompt.ranges},   {"last_value", maybe(prompt.last_value)},
          {"why", prompt.why},         {"value_text", prompt.value_text}};
}

json guard_json(const sequencer::GuardNow& guard) {
  return {{"name", guard.name},
          {"channel", guard.channel},
          {"unit", guard.unit},
          {"value", maybe(guard.value)},
          {"above", maybe(guard.above)},
          {"below", maybe(guard.below)},
          {"margin", maybe(guard.margin)},
          {"state", guard.state},
          {"action", guard.action}};
}

json event_json(const recorder::BenchEvent& event, std::int64_t utc_offset_ns) {
  return {{"at", iso_time(event.t_ns + utc_offset_ns)},
          {"kind", event.kind},
          {"source", event.source},
          {"text", event.text}};
}

json typed_json(const sequencer::TypedNow& typed) {
  return {{"prompt", typed.prompt},        {"channel", typed.channel},
          {"round", typed.round},          {"text", typed.text},
          {"value", typed.value},          {"unit", typed.unit},
          {"superseded", typed.superseded}};
}

}  // namespace

json to_json(const sequencer::Snapshot& snapshot, std::int64_t utc_offset_ns) {
  json guards = json::array();
  for (const auto& guard : snapshot.guards) guards.push_back(guard_json(guard));
  json events = json::array();
  for (const auto& event : snapshot.events) events.push_back(event_json(event, utc_offset_ns));
  json typed = json::array();
  for (const auto& value : snapshot.typed) typed.push_back(typed_json(value));
  json trips = json::array();
  for (const auto& trip : snapshot.trips) {
    trips.push_back({{"at", iso_time(trip.t_ns + utc_offset_ns)},
                     {"guard", trip.guard},
                     {"text", trip.text},
                     {"action", trip.action}});
  }
  return {{"change", snapshot.change},
          {"run", snapshot.run},
          {"phase", std::string{sequencer::name_of(snapshot.phase)}},
          {"prototype", snapshot.prototype},
          {"step_phase", std::string{sequencer::name_of(snapshot.step_phase)}},
          {"step", snapshot.step},
          {"steps", snapshot.steps},
          {"label", snapshot.label},
          {"waits_for", snapshot.waits_for},
          {"remaining_s", maybe(snapshot.remaining_s)},
          {"prompt", snapshot.prompt ? prompt_json(*snapshot.prompt) : json(nullptr)},
          {"typed", typed},
          {"guards", guards},
          {"trips", trips},
          {"events", events},
          {"reason", snapshot.reason},
          {"warnings", snapshot.warnings}};
}

json to_json(const std::vector<recorder::ChannelNow>& channels) {
  json list = json::array();
  for (const auto& channel : channels) {
    list.push_back({{"name", channel.name},
                    {"unit", channel.unit},
                    {"typed", channel.typed},
                    {"instrument", channel.instrument},
                    {"value", maybe(channel.value)},
                    {"age_s", maybe(channel.age_s)},
                    {"half_width_s", maybe(channel.half_width_s)},
                    {"quality", channel.words}});
  }
  return list;
}

json to_json(const std::vector<recorder::InstrumentNow>& instruments) {
  json list = json::array();
  for (const auto& instrument : instruments) {
    list.push_back({{"name", instrument.name},
                    {"link", instrument.link},
                    {"state", instrument.state},
                    {"ready", instrument.ready},
                    {"identity", instrument.identity}});
  }
  return list;
}

}  // namespace loadstair::service
