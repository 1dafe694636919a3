#include "daemon/store/insert.h"

#include <algorithm>
#include <type_traits>

#include "analysis/base/number.h"
#include "daemon/store/bytes.h"
#include "daemon/store/seal.h"

namespace loadstair::store {

std::int64_t Inserter::utc(RunId run, std::int64_t t_ns) const {
  const auto found = offsets_.find(run);
  // Unsigned, so that a wild instant wraps instead of being undefined.
  const auto offset = static_cast<std::uint64_t>(found == offsets_.end() ? utc_offset_ns_ : found->second);
  return static_cast<std::int64_t>(static_cast<std::uint64_t>(t_ns) + offset);
}

std::optional<std::int64_t> Inserter::utc(RunId run, std::optional<std::int64_t> t_ns) const {
  return t_ns ? std::optional{utc(run, *t_ns)} : std::nullopt;
}

void Inserter::forget() {
  known_run_ = 0;
}

void Inserter::require_run(RunId run) {
  if (run == known_run_) return;
  Statement& exists = connection_.cached("SELECT 1 FROM run WHERE id = ?");
  const bool found = exists.bind(run).step();
  sqlite3_reset(exists.handle());
  if (!found) throw SqlFault{SQLITE_CONSTRAINT, "there is no run " + base::print_integer(run)};
  known_run_ = run;
}

std::int64_t Inserter::text_id(const std::string& text) {
  const std::string digest = hexadecimal(sha256(text));
  connection_.cached("INSERT OR IGNORE INTO bench_text (sha256, text) VALUES (?, ?)")
      .bind(digest, text)
      .run();
  Statement& find = connection_.cached("SELECT id FROM bench_text WHERE sha256 = ?");
  const bool found = find.bind(digest).step();
  const std::int64_t id = found ? find.integer(0) : 0;
  sqlite3_reset(find.handle());
  return id;
}

void Inserter::insert(const Item& item, std::unique_ptr<OpenCapture>& rest) {
  std::visit(
      [&](const auto& one) {
        using One = std::decay_t<decltype(one)>;
        if constexpr (!std::is_same_v<One, RunBegin>) {
          if (!std::is_same_v<One, EventItem> || one.run != 0) require_run(one.run);
        }
        if constexpr (std::is_same_v<One, CaptureItem>) {
          rest = insert_capture(one);
        } else {
          insert_one(one);
        }
      },
      item);
}

void Inserter::insert_one(const RunBegin& item) {
  const RunStart& start = item.start;
  offsets_[item.run] = start.utc_offset_ns;
  const std::int64_t hookup = text_id(start.hookup_text);
  const std::int64_t stair = text_id(start.stair_text);
  connection_
      .cached(
          "INSERT INTO run (id, prototype, revision, unit, state, started_ns, utc_offset_ns, zone, seed, "
          "program_version, method_version, hookup_file, hookup, stair_file, stair) "
          "VALUES (?, ?, ?, ?, 'running', ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)")
      .bind(item.run, start.prototype, start.revision, start.unit, utc(item.run, start.started_ns),
            start.utc_offset_ns, start.zone, static_cast<std::int64_t>(start.seed), start.program_version,
            start.method_version, start.hookup_file, hookup, start.stair_file, stair)
      .run();
  connection_.cached("INSERT INTO owed_safe_state (run) VALUES (?)").bind(item.run).run();
  std::int32_t position = 0;
  for (const NamedText& profile : start.profiles) {
    const std::int64_t text = text_id(profile.text);
    connection_.cached("INSERT INTO run_profile (run, position, name, profile) VALUES (?, ?, ?, ?)")
        .bind(item.run, position++, profile.name, text)
        .run();
  }
  position = 0;
  for (const ChannelEntry& channel : start.channels) {
    connection_
        .cached(
            "INSERT INTO channel (run, position, name, instrument, value, unit) VALUES (?, ?, ?, ?, ?, ?)")
        .bind(item.run, position++, channel.name, channel.instrument, channel.value, channel.unit)
        .run();
  }
  position = 0;
  for (const StepPlan& step : start.steps) {
    connection_
        .cached("INSERT INTO step (run, position, label, load_w, state) VALUES (?, ?, ?, ?, 'waiting')")
        .bind(item.run, position++, step.label, step.load_w)
        .run();
  }
}

void Inserter::insert_one(const RunEnd& item) {
  connection_.cached("UPDATE run SET state = ?, ended_ns = ?, end_reason = ? WHERE id = ?")
      .bind(name_of(item.state), utc(item.run, item.ended_ns), item.reason, item.run)
      .run();
}

void Inserter::insert_one(const StepUpdate& item) {
  connection_
      .cached(
          "UPDATE step SET state = ?, begun_ns = ?, soak_begin_ns = ?, settle_begin_ns = ?, average_begin_ns "
          "= "
          "?, average_end_ns = ?, ended_ns = ?, settled_how = ?, settled_ns = ?, reason = ? WHERE run = ? "
          "AND "
          "position = ?")
      .bind(name_of(item.state), utc(item.run, item.begun_ns), utc(item.run, item.soak_begin_ns),
            utc(item.run, item.settle_begin_ns), utc(item.run, item.average_begin_ns),
            utc(item.run, item.average_end_ns), utc(item.run, item.ended_ns), item.settled_how,
            utc(item.run, item.settled_ns), item.reason, item.run, item.step)
      .run();
  if (sqlite3_changes(connection_.handle()) == 0) {
    throw SqlFault{SQLITE_CONSTRAINT,
                   "run " + base::print_integer(item.run) + " has no step " + base::print_integer(item.step)};
  }
}

void Inserter::insert_one(const ReplyItem& item) {
  const instrument::Exchange& exchange = item.exchange;
  connection_
      .cached(
          "INSERT INTO reply (run, instrument, sent_ns, received_ns, query, text) VALUES (?, ?, ?, ?, ?, ?)")
      .bind(item.run, item.instrument, utc(item.run, exchange.sent_ns), utc(item.run, exchange.received_ns),
            exchange.query, exchange.reply)
      .run();
  const std::int64_t reply = connection_.last_id();
  Statement& insert = connection_.cached(
      "INSERT INTO reading (run, channel, t_ns, half_width_ns, value, flags, range, reply) "
      "VALUES (?, ?, ?, ?, ?, ?, ?, ?)");
  const std::size_t count = std::min(item.channels.size(), exchange.readings.size());
  for (std::size_t i = 0; i < count; ++i) {
    if (item.channels[i] < 0) continue;
    const instrument::Reading& reading = exchange.readings[i];
    insert
        .bind(item.run, item.channels[i], utc(item.run, reading.t_ns), reading.half_width_ns, reading.value,
              reading.flags, reading.range == reading.range ? reading.range : 0.0, reply)
        .run();
  }
}

void Inserter::insert_one(const TypedAnswer& item) {
  // Earlier answers to the same question stay and are marked (R5).
  connection_
      .cached(
          "UPDATE typed_answer SET flags = flags | ? WHERE run = ? AND step = ? AND channel = ? AND round = "
          "?")
      .bind(static_cast<std::uint32_t>(instrument::kSuperseded), item.run, item.step, item.channel,
            item.round)
      .run();
  connection_
      .cached(
          "INSERT INTO typed_answer (run, step, channel, round, prompted_ns, entered_ns, text, value, unit, "
          "range, "
          "last_digit, flags) VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)")
      .bind(item.run, item.step, item.channel, item.round, utc(item.run, item.prompted_ns),
            utc(item.run, item.entered_ns), item.text, item.value, item.unit, item.range, item.last_digit,
            item.flags | instrument::kTyped)
      .run();
}

std::unique_ptr<OpenCapture> Inserter::insert_capture(const CaptureItem& item) {
  static const auto kNothing = std::make_shared<const std::string>();
  auto open = std::make_unique<OpenCapture>();
  open->bytes = item.bytes ? item.bytes : kNothing;
  connection_
      .cached(
          "INSERT INTO capture (run, step, file_name, instrument, t_ns, sha256, size, complete) "
          "VALUES (?, ?, ?, ?, ?, ?, ?, 0)")
      .bind(item.run, item.step, item.file_name, item.instrument, utc(item.run, item.t_ns),
            hexadecimal(sha256(*open->bytes)), static_cast<std::int64_t>(open->bytes->size()))
      .run();
  open->id = connection_.last_id();
  if (insert_chunk(*open)) return nullptr;
  return open;
}

bool Inserter::insert_chunk(OpenCapture& capture) {
  const std::size_t size = std::min(kChunkBytes, capture.bytes->size() - capture.offset);
  if (size > 0) {
    const std::vector<unsigned char> frame =
        compress(std::string_view{*capture.bytes}.substr(capture.offset, size));
    connection_.cached("INSERT INTO capture_chunk (capture, position, zstd) VALUES (?, ?, ?)")
        .bind(capture.id, capture.position, std::span<const unsigned char>{frame})
        .run();
  }
  const bool complete = capture.offset + size >= capture.bytes->size();
  if (complete) connection_.cached("UPDATE capture SET complete = 1 WHERE id = ?").bind(capture.id).run();
  capture.offset += size;
  ++capture.position;
  return complete;
}

void Inserter::insert_one(const EventItem& item) {
  connection_
      .cached(
          "INSERT INTO event (run, t_ns, kind, source, text, utc_offset_before_ns, utc_offset_after_ns) "
          "VALUES (?, ?, ?, ?, ?, ?, ?)")
      .bind(item.run == 0 ? std::optional<RunId>{} : item.run, utc(item.run, item.t_ns), item.kind,
            item.source, item.text, item.utc_offset_before_ns, item.utc_offset_after_ns)
      .run();
}

void Inserter::insert_own_event(const std::string& text) {
  Statement& now =
      connection_.cached("SELECT CAST((julianday('now') - 2440587.5) * 86400000 AS INTEGER) * 1000000");
  const std::int64_t t_ns = now.bind().step() ? now.integer(0) : 0;
  sqlite3_reset(now.handle());
  connection_
      .cached("INSERT INTO event (run, t_ns, kind, source, text) VALUES (NULL, ?, 'refused', 'record', ?)")
      .bind(t_ns, text)
      .run();
}

void Inserter::insert_one(const SettingItem& item) {
  connection_
      .cached(
          "INSERT INTO setting (run, step, control, setting, value, read_back, t_ns) VALUES (?, ?, ?, ?, ?, "
          "?, ?)")
      .bind(item.run, item.step, item.control, item.setting, item.value, item.read_back,
            utc(item.run, item.t_ns))
      .run();
}

void Inserter::insert_one(const PromptItem& item) {
  connection_
      .cached(
          "INSERT INTO prompt (run, step, text, answer, answered_by, prompted_ns, answered_ns) "
          "VALUES (?, ?, ?, ?, ?, ?, ?)")
      .bind(item.run, item.step, item.text, item.answer, item.by, utc(item.run, item.prompted_ns),
            utc(item.run, item.answered_ns))
      .run();
}

void Inserter::insert_one(const AmendmentItem& item) {
  connection_
      .cached(
          "INSERT INTO amendment (run, who, why, when_ns, document, path, old_value, new_value) "
          "VALUES (?, ?, ?, ?, ?, ?, ?, ?)")
      .bind(item.run, item.who, item.why, item.when_utc_ns, item.document, item.path, item.old_value,
            item.new_value)
      .run();
}

void Inserter::insert_one(const BenchCheckItem& item) {
  connection_.cached("INSERT INTO bench_check (run, kind, begun_ns, ended_ns, text) VALUES (?, ?, ?, ?, ?)")
      .bind(item.run, item.kind, utc(item.run, item.begun_ns), utc(item.run, item.ended_ns), item.text)
      .run();
}

void Inserter::insert_one(const SealItem& item) {
  seal_run(connection_, item.run, item.when_utc_ns);
}

void Inserter::insert_one(const SafeStateItem& item) {
  connection_.cached("DELETE FROM owed_safe_state WHERE run = ?").bind(item.run).run();
}

}  // namespace loadstair::store
