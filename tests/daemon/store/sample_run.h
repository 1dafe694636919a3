// A small run with one of everything, for the store's tests.
#pragma once

#include <cmath>
#include <limits>

#include "daemon/store/reader.h"
#include "daemon/store/record.h"

namespace loadstair::store_tests {

inline constexpr std::int64_t kSecond = 1'000'000'000;
inline constexpr std::int64_t kOffset = 1'790'000'000 * kSecond;  // UTC of the monotonic zero

inline store::RunStart sample_start() {
  store::RunStart start;
  start.prototype = "Marten";
  start.revision = "C";
  start.unit = "C-003";
  start.started_ns = 5 * kSecond;
  start.utc_offset_ns = kOffset;
  start.zone = "Europe/Berlin";
  start.seed = 0xffff'ffff'ffff'fff0ULL;  // beyond a signed number: must come back whole
  start.program_version = "0.1.0";
  start.method_version = "1";
  start.hookup_file = "north_bench.hookup.json";
  start.hookup_text = "{\"format\": 1}";
  start.stair_file = "marten.stair.json";
  start.stair_text = "{\"format\": 1, \"x\": \"\xC2\xB5\"}";
  start.profiles = {{"scpi-meter", "{}"}, {"text-line", "{\"a\": 1}"}};
  start.channels = {{"input voltage", "V1", "reading", "V"}, {"input current", "", "", "A"}};
  start.steps = {{"5 %", 30.0}, {"10 %", 60.0}};
  return start;
}

inline store::ReplyItem sample_reply(store::RunId run, std::int64_t t_ns, double value,
                                     std::uint32_t flags = 0) {
  store::ReplyItem item;
  item.run = run;
  item.instrument = "V1";
  item.exchange.sent_ns = t_ns - 1000;
  item.exchange.received_ns = t_ns + 1000;
  item.exchange.query = "MEAS:VOLT?";
  item.exchange.reply = "+3.85012E+02";
  instrument::Reading reading;
  reading.t_ns = t_ns;
  reading.half_width_ns = 1500;
  reading.value = value;
  reading.flags = flags;
  reading.range = 600.0;
  item.exchange.readings = {reading};
  item.channels = {0};
  return item;
}

/// Posts one of everything and ends the run, with the bench safe; not sealed.
inline store::RunId post_sample_run(store::Writer& writer) {
  const store::RunId run = writer.begin_run(sample_start());
  store::StepUpdate step;
  step.run = run;
  step.step = 0;
  step.state = store::StepState::done;
  step.begun_ns = 6 * kSecond;
  step.soak_begin_ns = 7 * kSecond;
  step.settle_begin_ns = 8 * kSecond;
  step.average_begin_ns = 10 * kSecond;
  step.average_end_ns = 15 * kSecond;
  step.ended_ns = 16 * kSecond;
  step.settled_how = "rate";
  step.settled_ns = 9 * kSecond;
  writer.post(step);
  writer.post(sample_reply(run, 11 * kSecond, 385.012));
  writer.post(
      sample_reply(run, 12 * kSecond, std::numeric_limits<double>::quiet_NaN(), instrument::kInvalid));
  store::TypedAnswer answer;
  answer.run = run;
  answer.channel = 1;
  answer.prompted_ns = 13 * kSecond;
  answer.entered_ns = 14 * kSecond;
  answer.text = "15.6";
  answer.value = 15.6;
  answer.unit = "A";
  answer.range = 10.0;
  answer.last_digit = 0.01;
  writer.post(answer);
  answer.text = "1.56";
  answer.value = 1.56;
  answer.flags = instrument::kTyped | instrument::kImplausible;
  writer.post(answer);
  store::CaptureItem capture;
  capture.run = run;
  capture.step = 0;
  capture.file_name = "step_0.csv";
  capture.instrument = "scope";
  capture.t_ns = 15 * kSecond;
  capture.bytes = std::make_shared<const std::string>("t,v\n0,1\n");
  writer.post(capture);
  writer.post(store::EventItem{run, 11 * kSecond, "clock step", "clock", "the wall clock moved", kOffset,
                               kOffset + 5});
  writer.post(store::SettingItem{run, 0, "load", "power", 30.0, 29.98, 6 * kSecond});
  writer.post(store::SettingItem{run, -1, "source", "output", 1.0, std::nullopt, 5 * kSecond});
  writer.post(
      store::PromptItem{run, 0, "Switch on two lamps.", "done", "rehearsal", 6 * kSecond, 7 * kSecond});
  writer.post(store::BenchCheckItem{run, "zero", 5 * kSecond, 6 * kSecond, "input shorted"});
  writer.post(store::RunEnd{run, store::RunState::done, 20 * kSecond, "all steps done"});
  writer.post(store::AmendmentItem{run, "A. Bench", "the shunt's certificate", kOffset + 30 * kSecond,
                                   "hookup", "/channels/1/conversion/shunt/resistance_ohm", "0.1", "0.1001"});
  writer.post(store::SafeStateItem{run});
  return run;
}

}  // namespace loadstair::store_tests
