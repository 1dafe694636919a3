#include "daemon/store/schema.h"

#include "analysis/base/number.h"

namespace loadstair::store {
namespace {

constexpr std::string_view kTables = R"sql(
CREATE TABLE bench_text (
  id INTEGER PRIMARY KEY, sha256 TEXT NOT NULL UNIQUE, text TEXT NOT NULL) STRICT;
CREATE TABLE run (
  id INTEGER PRIMARY KEY, prototype TEXT NOT NULL, revision TEXT NOT NULL, unit TEXT NOT NULL,
  state TEXT NOT NULL, started_ns INTEGER NOT NULL, ended_ns INTEGER, end_reason TEXT NOT NULL DEFAULT '',
  utc_offset_ns INTEGER NOT NULL, zone TEXT NOT NULL, seed INTEGER NOT NULL,
  program_version TEXT NOT NULL, method_version TEXT NOT NULL,
  hookup_file TEXT NOT NULL, hookup INTEGER NOT NULL REFERENCES bench_text,
  stair_file TEXT NOT NULL, stair INTEGER NOT NULL REFERENCES bench_text) STRICT;
CREATE TABLE run_profile (
  run INTEGER NOT NULL REFERENCES run, position INTEGER NOT NULL, name TEXT NOT NULL,
  profile INTEGER NOT NULL REFERENCES bench_text, PRIMARY KEY (run, position)) STRICT, WITHOUT ROWID;
CREATE TABLE channel (
  run INTEGER NOT NULL REFERENCES run, position INTEGER NOT NULL, name TEXT NOT NULL, instrument TEXT NOT NULL,
  value TEXT NOT NULL, unit TEXT NOT NULL, PRIMARY KEY (run, position)) STRICT, WITHOUT ROWID;
CREATE TABLE step (
  run INTEGER NOT NULL REFERENCES run, position INTEGER NOT NULL, label TEXT NOT NULL, load_w REAL NOT NULL,
  state TEXT NOT NULL, begun_ns INTEGER, soak_begin_ns INTEGER, settle_begin_ns INTEGER, average_begin_ns INTEGER,
  average_end_ns INTEGER, ended_ns INTEGER, settled_how TEXT NOT NULL DEFAULT '', settled_ns INTEGER,
  reason TEXT NOT NULL DEFAULT '', PRIMARY KEY (run, position)) STRICT, WITHOUT ROWID;
CREATE TABLE reply (
  id INTEGER PRIMARY KEY, run INTEGER NOT NULL REFERENCES run, instrument TEXT NOT NULL, sent_ns INTEGER NOT NULL,
  received_ns INTEGER NOT NULL, query TEXT NOT NULL, text TEXT NOT NULL) STRICT;
CREATE INDEX reply_of_run ON reply (run);
CREATE TABLE reading (
  id INTEGER PRIMARY KEY, run INTEGER NOT NULL REFERENCES run, channel INTEGER NOT NULL, t_ns INTEGER NOT NULL,
  half_width_ns INTEGER NOT NULL, value REAL, flags INTEGER NOT NULL, range REAL NOT NULL,
  reply INTEGER NOT NULL REFERENCES reply) STRICT;
CREATE INDEX reading_of_run ON reading (run);
CREATE TABLE typed_answer (
  id INTEGER PRIMARY KEY, run INTEGER NOT NULL REFERENCES run, step INTEGER NOT NULL, channel INTEGER NOT NULL,
  round INTEGER NOT NULL, prompted_ns INTEGER NOT NULL, entered_ns INTEGER NOT NULL, text TEXT NOT NULL, value REAL,
  unit TEXT NOT NULL, range REAL NOT NULL, last_digit REAL NOT NULL, flags INTEGER NOT NULL) STRICT;
CREATE INDEX typed_answer_of_run ON typed_answer (run, step, channel, round);
CREATE TABLE capture (
  id INTEGER PRIMARY KEY, run INTEGER NOT NULL REFERENCES run, step INTEGER NOT NULL, file_name TEXT NOT NULL,
  instrument TEXT NOT NULL, t_ns INTEGER NOT NULL, sha256 TEXT NOT NULL, size INTEGER NOT NULL,
  complete INTEGER NOT NULL) STRICT;
CREATE INDEX capture_of_run ON capture (run);
CREATE TABLE capture_chunk (
  capture INTEGER NOT NULL REFERENCES capture, position INTEGER NOT NULL, zstd BLOB NOT NULL,
  PRIMARY KEY (capture, position)) STRICT;
CREATE TABLE event (
  id INTEGER PRIMARY KEY, run INTEGER REFERENCES run, t_ns INTEGER NOT NULL, kind TEXT NOT NULL,
  source TEXT NOT NULL, text TEXT NOT NULL, utc_offset_before_ns INTEGER, utc_offset_after_ns INTEGER) STRICT;
CREATE INDEX event_of_run ON event (run);
CREATE TABLE setting (
  id INTEGER PRIMARY KEY, run INTEGER NOT NULL REFERENCES run, step INTEGER NOT NULL, control TEXT NOT NULL,
  setting TEXT NOT NULL, value REAL NOT NULL, read_back REAL, t_ns INTEGER NOT NULL) STRICT;
CREATE INDEX setting_of_run ON setting (run);
CREATE TABLE prompt (
  id INTEGER PRIMARY KEY, run INTEGER NOT NULL REFERENCES run, step INTEGER NOT NULL, text TEXT NOT NULL,
  answer TEXT NOT NULL, answered_by TEXT NOT NULL, prompted_ns INTEGER NOT NULL,
  answered_ns INTEGER NOT NULL) STRICT;
CREATE INDEX prompt_of_run ON prompt (run);
CREATE TABLE bench_check (
  id INTEGER PRIMARY KEY, run INTEGER NOT NULL REFERENCES run, kind TEXT NOT NULL, begun_ns INTEGER NOT NULL,
  ended_ns INTEGER NOT NULL, text TEXT NOT NULL) STRICT;
CREATE INDEX bench_check_of_run ON bench_check (run);
CREATE TABLE amendment (
  id INTEGER PRIMARY KEY, run INTEGER NOT NULL REFERENCES run, who TEXT NOT NULL, why TEXT NOT NULL,
  when_ns INTEGER NOT NULL, document TEXT NOT NULL, path TEXT NOT NULL, old_value TEXT NOT NULL,
  new_value TEXT NOT NULL) STRICT;
CREATE INDEX amendment_of_run ON amendment (run);
CREATE TABLE seal (
  id INTEGER PRIMARY KEY, run INTEGER NOT NULL UNIQUE REFERENCES run, when_ns INTEGER NOT NULL,
  previous BLOB NOT NULL, content BLOB NOT NULL, digest BLOB NOT NULL) STRICT;
CREATE TABLE owed_safe_state (run INTEGER PRIMARY KEY REFERENCES run) STRICT;
CREATE VIEW plain_reading AS
  SELECT reading.id, reading.run, step.position AS step, step.label AS step_label, channel.name AS channel,
    strftime('%Y-%m-%dT%H:%M:%S', reading.t_ns / 1000000000, 'unixepoch')
      || printf('.%09dZ', reading.t_ns % 1000000000) AS utc,
    reading.t_ns, reading.half_width_ns, reading.value, channel.unit, reading.flags, reading.range,
    reply.query, reply.text AS reply
  FROM reading JOIN channel ON channel.run = reading.run AND channel.position = reading.channel
    JOIN reply ON reply.id = reading.reply
    LEFT JOIN step ON step.run = reading.run AND reading.t_ns >= step.begun_ns AND reading.t_ns < step.ended_ns;
)sql";

void add_refusal(std::string& sql, std::string_view table, std::string_view verb,
                 const std::string& condition, std::string_view message) {
  sql += "CREATE TRIGGER ";
  sql += std::string{table} + "_" + std::string{verb} + "_refused BEFORE " + std::string{verb} + " ON " +
         std::string{table};
  if (!condition.empty()) sql += " WHEN " + condition;
  sql += " BEGIN SELECT RAISE(ABORT, '" + std::string{message} + "'); END;\n";
}

std::string is_sealed(std::string_view run) {
  return "EXISTS (SELECT 1 FROM seal WHERE seal.run = " + std::string{run} + ")";
}

/// R7: every table of a run refuses all three verbs once the run is sealed.
void add_seal_triggers(std::string& sql, std::string_view table, const std::string& run_column) {
  const std::string old_run = is_sealed("OLD." + run_column);
  const std::string new_run = is_sealed("NEW." + run_column);
  constexpr std::string_view kMessage = "the run is sealed";
  add_refusal(sql, table, "INSERT", new_run, kMessage);
  add_refusal(sql, table, "UPDATE", old_run + " OR " + new_run, kMessage);
  add_refusal(sql, table, "DELETE", old_run, kMessage);
}

}  // namespace

const std::vector<SealedTable>& sealed_tables() {
  static const std::vector<SealedTable> tables = {
      {"run",
       "id, prototype, revision, unit, state, started_ns, ended_ns, end_reason, utc_offset_ns, zone, seed, "
       "program_version, method_version, hookup_file, (SELECT sha256 FROM bench_text WHERE id = hookup), "
       "stair_file, (SELECT sha256 FROM bench_text WHERE id = stair)",
       "id"},
      {"run_profile", "position, name, (SELECT sha256 FROM bench_text WHERE id = profile)", "position"},
      {"channel", "position, name, instrument, value, unit", "position"},
      {"step",
       "position, label, load_w, state, begun_ns, soak_begin_ns, settle_begin_ns, average_begin_ns, "
       "average_end_ns, ended_ns, settled_how, settled_ns, reason",
       "position"},
      {"reply", "id, instrument, sent_ns, received_ns, query, text", "id"},
      {"reading", "id, channel, t_ns, half_width_ns, value, flags, range, reply", "id"},
      {"typed_answer",
       "id, step, channel, round, prompted_ns, entered_ns, text, value, unit, range, last_digit, flags",
       "id"},
      {"capture", "id, step, file_name, instrument, t_ns, sha256, size, complete", "id"},
      {"event", "id, t_ns, kind, source, text, utc_offset_before_ns, utc_offset_after_ns", "id"},
      {"setting", "id, step, control, setting, value, read_back, t_ns", "id"},
      {"prompt", "id, step, text, answer, answered_by, prompted_ns, answered_ns", "id"},
      {"bench_check", "id, kind, begun_ns, ended_ns, text", "id"},
  };
  return tables;
}

std::string schema_1() {
  std::string sql{kTables};
  for (const SealedTable& table : sealed_tables()) {
    add_seal_triggers(sql, table.name, table.name == "run" ? "id" : "run");
  }
  const auto owner = [](std::string_view row) {
    return is_sealed("(SELECT run FROM capture WHERE id = " + std::string{row} + ".capture)");
  };
  add_refusal(sql, "capture_chunk", "INSERT", owner("NEW"), "the run is sealed");
  add_refusal(sql, "capture_chunk", "UPDATE", owner("OLD") + " OR " + owner("NEW"), "the run is sealed");
  add_refusal(sql, "capture_chunk", "DELETE", owner("OLD"), "the run is sealed");
  for (const std::string_view table : {"amendment", "seal", "bench_text"}) {
    add_refusal(sql, table, "UPDATE", "", "never changed");
    add_refusal(sql, table, "DELETE", "", "never deleted");
  }
  sql += "PRAGMA application_id = " + base::print_integer(kApplicationId) + ";\nPRAGMA user_version = 1;\n";
  return sql;
}

}  // namespace loadstair::store
