#include "daemon/store/reader.h"

#include <algorithm>
#include <limits>

#include "analysis/base/number.h"
#include "daemon/store/bytes.h"
#include "daemon/store/seal.h"
#include "daemon/store/state.h"

namespace loadstair::store {
namespace {

using Connection = Record::Connection;

RunState run_state(std::string_view name) {
  for (const RunState state : {RunState::running, RunState::done, RunState::stopped}) {
    if (name == name_of(state)) return state;
  }
  return RunState::interrupted;
}

StepState step_state(std::string_view name) {
  for (const StepState state :
       {StepState::waiting, StepState::soaking, StepState::settling, StepState::averaging,
        StepState::capturing, StepState::done, StepState::skipped}) {
    if (name == name_of(state)) return state;
  }
  return StepState::stopped;
}

constexpr const char* kSummary =
    "SELECT id, prototype, revision, unit, state, started_ns, ended_ns, zone, "
    "(SELECT count(*) FROM step WHERE step.run = run.id), "
    "(SELECT count(*) FROM step WHERE step.run = run.id AND step.state = 'done'), "
    "EXISTS (SELECT 1 FROM seal WHERE seal.run = run.id) FROM run ";

RunSummary read_summary(const Statement& row) {
  RunSummary summary;
  summary.run = row.integer(0);
  summary.prototype = row.text(1);
  summary.revision = row.text(2);
  summary.unit = row.text(3);
  summary.state = run_state(row.bytes(4));
  summary.started_ns = row.integer(5);
  summary.ended_ns = row.maybe_integer(6);
  summary.zone = row.text(7);
  summary.steps = row.small(8);
  summary.steps_done = row.small(9);
  summary.sealed = row.integer(10) != 0;
  return summary;
}

bool read_head(Connection& connection, RunId run, StoredRun& into) {
  Statement summary{connection.handle(), std::string{kSummary} + "WHERE id = ?"};
  if (!summary.bind(run).step()) return false;
  into.summary = read_summary(summary);
  Statement row{
      connection.handle(),
      "SELECT utc_offset_ns, seed, program_version, method_version, hookup_file, h.text, stair_file, s.text, "
      "end_reason FROM run JOIN bench_text h ON h.id = hookup JOIN bench_text s ON s.id = stair "
      "WHERE run.id = ?"};
  if (!row.bind(run).step()) return false;
  into.utc_offset_ns = row.integer(0);
  into.seed = static_cast<std::uint64_t>(row.integer(1));
  into.program_version = row.text(2);
  into.method_version = row.text(3);
  into.hookup_file = row.text(4);
  into.hookup_text = row.text(5);
  into.stair_file = row.text(6);
  into.stair_text = row.text(7);
  into.end_reason = row.text(8);
  Statement profiles{
      connection.handle(),
      "SELECT name, text FROM run_profile JOIN bench_text ON bench_text.id = profile WHERE run = ? "
      "ORDER BY position"};
  profiles.bind(run);
  while (profiles.step()) into.profiles.push_back({profiles.text(0), profiles.text(1)});
  return true;
}

void read_steps(Connection& connection, RunId run, StoredRun& into) {
  Statement row{
      connection.handle(),
      "SELECT position, label, load_w, state, begun_ns, soak_begin_ns, settle_begin_ns, average_begin_ns, "
      "average_end_ns, ended_ns, settled_how, settled_ns, reason FROM step WHERE run = ? ORDER BY position"};
  row.bind(run);
  while (row.step()) {
    StoredStep step;
    step.index = row.small(0);
    step.label = row.text(1);
    step.load_w = row.real(2);
    step.state = step_state(row.bytes(3));
    step.begun_ns = row.maybe_integer(4);
    step.soak_begin_ns = row.maybe_integer(5);
    step.settle_begin_ns = row.maybe_integer(6);
    step.average_begin_ns = row.maybe_integer(7);
    step.average_end_ns = row.maybe_integer(8);
    step.ended_ns = row.maybe_integer(9);
    step.settled_how = row.text(10);
    step.settled_ns = row.maybe_integer(11);
    step.reason = row.text(12);
    into.steps.push_back(std::move(step));
  }
}

void read_channels(Connection& connection, RunId run, StoredRun& into) {
  Statement row{connection.handle(),
                "SELECT name, instrument, value, unit FROM channel WHERE run = ? ORDER BY position"};
  row.bind(run);
  while (row.step()) {
    into.channels.push_back(
        {ChannelEntry{row.text(0), row.text(1), row.text(2), row.text(3)}, {}, {}, {}, {}, {}, {}});
  }
  Statement reading{
      connection.handle(),
      "SELECT channel, t_ns, half_width_ns, value, flags, range, reply FROM reading WHERE run = ? "
      "ORDER BY id"};
  reading.bind(run);
  while (reading.step()) {
    const std::int64_t index = reading.integer(0);
    if (index < 0 || index >= static_cast<std::int64_t>(into.channels.size())) continue;
    StoredChannel& channel = into.channels[static_cast<std::size_t>(index)];
    channel.t_ns.push_back(reading.integer(1));
    channel.half_width_ns.push_back(reading.integer(2));
    channel.value.push_back(reading.real(3));
    channel.flags.push_back(static_cast<std::uint32_t>(reading.integer(4)));
    channel.range.push_back(reading.real(5));
    channel.reply.push_back(reading.integer(6));
  }
}

void read_typed(Connection& connection, RunId run, StoredRun& into) {
  Statement row{connection.handle(),
                "SELECT step, channel, round, prompted_ns, entered_ns, text, unit, value, range, last_digit, "
                "flags FROM "
                "typed_answer WHERE run = ? ORDER BY id"};
  row.bind(run);
  while (row.step()) {
    StoredTypedAnswer answer;
    answer.step = row.small(0);
    answer.channel = row.small(1);
    answer.round = row.small(2);
    answer.prompted_ns = row.integer(3);
    answer.entered_ns = row.integer(4);
    answer.text = row.text(5);
    answer.unit = row.text(6);
    answer.value = row.real(7);
    answer.range = row.real(8);
    answer.last_digit = row.real(9);
    answer.flags = static_cast<std::uint32_t>(row.integer(10));
    into.typed.push_back(std::move(answer));
  }
}

/// The file of a capture (R6). False: it is not what its digest says.
bool read_bytes(Connection& connection, StoredCapture& capture) {
  Statement chunk{connection.handle(), "SELECT zstd FROM capture_chunk WHERE capture = ? ORDER BY position"};
  chunk.bind(capture.id);
  while (chunk.step()) {
    if (!decompress(chunk.bytes(0), kChunkBytes, capture.bytes)) return false;
  }
  return static_cast<std::int64_t>(capture.bytes.size()) == capture.size &&
         hexadecimal(sha256(capture.bytes)) == capture.sha256;
}

base::Outcome<void> read_captures(Connection& connection, RunId run, bool with_bytes, StoredRun& into) {
  Statement row{connection.handle(),
                "SELECT id, step, file_name, instrument, t_ns, sha256, size FROM capture WHERE run = ? AND "
                "complete = 1 "
                "ORDER BY id"};
  row.bind(run);
  while (row.step()) {
    StoredCapture capture;
    capture.id = row.integer(0);
    capture.step = row.small(1);
    capture.file_name = row.text(2);
    capture.instrument = row.text(3);
    capture.t_ns = row.integer(4);
    capture.sha256 = row.text(5);
    capture.size = row.integer(6);
    if (with_bytes && !read_bytes(connection, capture)) {
      return base::Refusal{
          "run " + base::print_integer(run) + ", capture " + capture.file_name,
          "its bytes are not what their digest says: the record is damaged. Compare with a copy"};
    }
    into.captures.push_back(std::move(capture));
  }
  return {};
}

StoredEvent read_event(const Statement& row) {
  StoredEvent event;
  event.id = row.integer(0);
  event.run = row.integer(1);
  event.t_ns = row.integer(2);
  event.kind = row.text(3);
  event.source = row.text(4);
  event.text = row.text(5);
  event.utc_offset_before_ns = row.maybe_integer(6);
  event.utc_offset_after_ns = row.maybe_integer(7);
  return event;
}

constexpr const char* kEvent =
    "SELECT id, coalesce(run, 0), t_ns, kind, source, text, utc_offset_before_ns, utc_offset_after_ns FROM "
    "event ";

void read_rest(Connection& connection, RunId run, StoredRun& into) {
  Statement event{connection.handle(), std::string{kEvent} + "WHERE run = ? ORDER BY id"};
  event.bind(run);
  while (event.step()) into.events.push_back(read_event(event));

  Statement setting{
      connection.handle(),
      "SELECT step, control, setting, value, read_back, t_ns FROM setting WHERE run = ? ORDER BY id"};
  setting.bind(run);
  while (setting.step()) {
    into.settings.push_back({setting.small(0), setting.text(1), setting.text(2), setting.real(3),
                             setting.maybe_real(4), setting.integer(5)});
  }
  Statement prompt{
      connection.handle(),
      "SELECT step, text, answer, answered_by, prompted_ns, answered_ns FROM prompt WHERE run = ? "
      "ORDER BY id"};
  prompt.bind(run);
  while (prompt.step()) {
    into.prompts.push_back({prompt.small(0), prompt.text(1), prompt.text(2), prompt.text(3),
                            prompt.integer(4), prompt.integer(5)});
  }
  Statement amendment{
      connection.handle(),
      "SELECT who, why, document, path, old_value, new_value, when_ns FROM amendment WHERE run = ? "
      "ORDER BY id"};
  amendment.bind(run);
  while (amendment.step()) {
    into.amendments.push_back({amendment.text(0), amendment.text(1), amendment.text(2), amendment.text(3),
                               amendment.text(4), amendment.text(5), amendment.integer(6)});
  }
}

std::string known_runs(Connection& connection) {
  Statement range{connection.handle(), "SELECT count(*), min(id), max(id) FROM run"};
  if (!range.step() || range.integer(0) == 0) return "the record holds no run yet";
  if (range.integer(0) == 1) return "the record holds run " + base::print_integer(range.integer(1));
  return "the record holds runs " + base::print_integer(range.integer(1)) + " to " +
         base::print_integer(range.integer(2));
}

}  // namespace

Reader::Reader(std::unique_ptr<State> state) : state_{std::move(state)} {}
Reader::Reader(Reader&&) noexcept = default;
Reader& Reader::operator=(Reader&&) noexcept = default;
Reader::~Reader() = default;

base::Outcome<std::vector<RunSummary>> Reader::list_runs() const {
  try {
    std::vector<RunSummary> runs;
    Statement row{state_->connection->handle(), std::string{kSummary} + "ORDER BY id"};
    while (row.step()) runs.push_back(read_summary(row));
    return runs;
  } catch (const SqlFault& fault) {
    return to_refusal(fault, state_->path);
  }
}

base::Outcome<StoredRun> Reader::load_run(RunId run, LoadOptions options) const {
  try {
    Connection& connection = *state_->connection;
    const Transaction one_state{connection, false};
    StoredRun stored;
    if (!read_head(connection, run, stored)) {
      return base::Refusal{state_->path,
                           "there is no run " + base::print_integer(run) + "; " + known_runs(connection)};
    }
    read_steps(connection, run, stored);
    read_channels(connection, run, stored);
    read_typed(connection, run, stored);
    read_rest(connection, run, stored);
    if (auto captures = read_captures(connection, run, options.captures, stored); !captures) {
      return captures.refusal();
    }
    return stored;
  } catch (const SqlFault& fault) {
    return to_refusal(fault, state_->path);
  }
}

base::Outcome<std::vector<StoredReply>> Reader::load_replies(RunId run) const {
  try {
    std::vector<StoredReply> replies;
    Statement row{
        state_->connection->handle(),
        "SELECT id, instrument, query, text, sent_ns, received_ns FROM reply WHERE run = ? ORDER BY id"};
    row.bind(run);
    while (row.step()) {
      replies.push_back(
          {row.integer(0), row.text(1), row.text(2), row.text(3), row.integer(4), row.integer(5)});
    }
    return replies;
  } catch (const SqlFault& fault) {
    return to_refusal(fault, state_->path);
  }
}

base::Outcome<std::vector<StoredEvent>> Reader::events(std::int64_t after, std::size_t most) const {
  try {
    std::vector<StoredEvent> events;
    Statement row{state_->connection->handle(), std::string{kEvent} + "WHERE id > ? ORDER BY id LIMIT ?"};
    constexpr auto kMost = static_cast<std::size_t>(std::numeric_limits<std::int64_t>::max());
    row.bind(after, static_cast<std::int64_t>(std::min(most, kMost)));
    while (row.step()) events.push_back(read_event(row));
    return events;
  } catch (const SqlFault& fault) {
    return to_refusal(fault, state_->path);
  }
}

base::Outcome<void> Reader::verify_seals() const {
  try {
    const Transaction one_state{*state_->connection, false};
    return verify_chain(*state_->connection, state_->path);
  } catch (const SqlFault& fault) {
    return to_refusal(fault, state_->path);
  }
}

}  // namespace loadstair::store
