#include "daemon/store/record.h"

#include <unistd.h>

#include <filesystem>
#include <system_error>

#include "analysis/base/number.h"
#include "analysis/base/require.h"
#include "daemon/store/schema.h"
#include "daemon/store/state.h"

namespace loadstair::store {
namespace {

namespace fs = std::filesystem;

std::int64_t pragma(Record::Connection& connection, const std::string& name) {
  Statement statement{connection.handle(), "PRAGMA " + name};
  return statement.step() ? statement.integer(0) : 0;
}

bool is_empty(Record::Connection& connection) {
  Statement statement{connection.handle(), "SELECT count(*) FROM sqlite_schema"};
  return statement.step() && statement.integer(0) == 0;
}

/// Refuses what is not a record of ours, or of a program to come.
base::Outcome<void> check_kind(Record::Connection& connection, const std::string& path) {
  if (pragma(connection, "application_id") != kApplicationId) {
    return base::Refusal{path, "this SQLite file is not a Loadstair record. Name another file"};
  }
  const std::int64_t schema = pragma(connection, "user_version");
  if (schema < 1 || schema > kSchema) {
    return base::Refusal{path, "written by a newer program (schema " + base::print_integer(schema) +
                                   "; this one knows schemas up to " + base::print_integer(kSchema) +
                                   "). Update this program; the record is untouched"};
  }
  return {};
}

/// A folder that cannot be written still lets a cleanly closed record be read.
std::unique_ptr<Record::Connection> open_to_read(const std::string& path) {
  try {
    auto connection = std::make_unique<Record::Connection>(path, SQLITE_OPEN_READONLY);
    static_cast<void>(pragma(*connection, "schema_version"));
    return connection;
  } catch (const SqlFault&) {
    std::error_code none;
    if (!fs::exists(path, none) || fs::exists(path + "-wal", none)) throw;
  }
  std::string escaped;
  for (const char c : path) {
    if (c == '?' || c == '#' || c == '%') {
      constexpr std::string_view kDigits = "0123456789ABCDEF";
      const auto code = static_cast<unsigned char>(c);
      escaped += '%';
      escaped += kDigits[code >> 4U];
      escaped += kDigits[code & 15U];
    } else {
      escaped += c;
    }
  }
  return std::make_unique<Record::Connection>("file:" + escaped + "?immutable=1",
                                              SQLITE_OPEN_READONLY | SQLITE_OPEN_URI);
}

void prepare_to_write(Record::Connection& connection) {
  connection.execute("PRAGMA journal_mode=WAL");
  // Both before anything is written: a commit counts only when it is on the disk (R10).
  connection.execute("PRAGMA synchronous=FULL");
  connection.execute("PRAGMA foreign_keys=OFF");
  connection.execute("PRAGMA journal_size_limit=67108864");
}

base::Outcome<void> create_or_check(Record::Connection& connection, const std::string& path) {
  if (is_empty(connection) && pragma(connection, "application_id") == 0) {
    Transaction transaction{connection, true};
    if (is_empty(connection)) connection.execute(schema_1());
    transaction.commit();
  }
  return check_kind(connection, path);
}

}  // namespace

std::string_view name_of(RunState state) {
  switch (state) {
    case RunState::running:
      return "running";
    case RunState::done:
      return "done";
    case RunState::stopped:
      return "stopped";
    case RunState::interrupted:
      return "interrupted";
  }
  return "interrupted";
}

std::string_view name_of(StepState state) {
  switch (state) {
    case StepState::waiting:
      return "waiting";
    case StepState::soaking:
      return "soaking";
    case StepState::settling:
      return "settling";
    case StepState::averaging:
      return "averaging";
    case StepState::capturing:
      return "capturing";
    case StepState::done:
      return "done";
    case StepState::skipped:
      return "skipped";
    case StepState::stopped:
      return "stopped";
  }
  return "stopped";
}

base::Refusal to_refusal(const SqlFault& fault, const std::string& path) {
  switch (fault.code & 0xff) {
    case SQLITE_NOTADB:
      return {path, "this file is not a Loadstair record (not an SQLite file). Name another file"};
    case SQLITE_CORRUPT:
      return {path,
              "the record is damaged: " + fault.text + ". Work on a copy; sqlite3's .recover may save rows"};
    case SQLITE_CANTOPEN:
    case SQLITE_PERM:
    case SQLITE_READONLY:
      return {path, "cannot be opened: " + fault.text + ". Look at the path and its permissions"};
    case SQLITE_BUSY:
      return {path, "in use by another program. Close that one, or try again"};
    default:
      return {path, "cannot be read: " + fault.text};
  }
}

Record::Record(std::unique_ptr<State> state) : state_{std::move(state)} {}
Record::Record(Record&&) noexcept = default;
Record& Record::operator=(Record&&) noexcept = default;

Record::~Record() {
  if (!state_ || !state_->write || state_->failed) return;
  try {
    state_->write->execute("PRAGMA wal_checkpoint(TRUNCATE)");
  } catch (const SqlFault&) {
    // What is in the journal is read from there the next time.
  }
}

base::Outcome<Record> Record::open(const std::string& path, Mode mode) {
  std::error_code none;
  if (fs::is_directory(path, none)) {
    return base::Refusal{path, "this is a folder, not a record. Name a file, such as " + path + "/record.db"};
  }
  if (mode == Mode::read && !fs::exists(path, none)) {
    return base::Refusal{path, "there is no such record. `loadstair demo` or `loadstair daemon` make one"};
  }
  auto state = std::make_unique<State>();
  state->path = path;
  state->mode = mode;
  try {
    if (mode == Mode::read) {
      const auto connection = open_to_read(path);
      if (auto checked = check_kind(*connection, path); !checked) return checked.refusal();
      return Record{std::move(state)};
    }
    auto lock = WriteLock::take(path);
    if (!lock) return lock.refusal();
    state->lock.emplace(std::move(*lock));
    state->write = std::make_unique<Connection>(path, SQLITE_OPEN_READWRITE | SQLITE_OPEN_CREATE);
    if (!is_empty(*state->write)) {
      if (auto checked = check_kind(*state->write, path); !checked) {
        state->failed = true;  // not ours: nothing is done to it
        return checked.refusal();
      }
    }
    prepare_to_write(*state->write);
    if (auto made = create_or_check(*state->write, path); !made) return made.refusal();
    return Record{std::move(state)};
  } catch (const SqlFault& fault) {
    return to_refusal(fault, path);
  }
}

const std::string& Record::path() const {
  return state_->path;
}

base::Outcome<Reader> Record::reader() const {
  try {
    auto state = std::make_unique<Reader::State>();
    state->path = state_->path;
    state->connection = open_to_read(state_->path);
    return Reader{std::move(state)};
  } catch (const SqlFault& fault) {
    return to_refusal(fault, state_->path);
  }
}

base::Outcome<std::vector<RunId>> Record::mark_interrupted(std::int64_t utc_ns) {
  base::require(state_->write != nullptr && !state_->writer_lives, "mark_interrupted before any writer");
  try {
    Connection& connection = *state_->write;
    Transaction transaction{connection, true};
    std::vector<RunId> runs;
    Statement left{connection.handle(), "SELECT id FROM run WHERE state = 'running' ORDER BY id"};
    while (left.step()) runs.push_back(left.integer(0));
    for (const RunId run : runs) {
      connection
          .cached(
              "UPDATE step SET state = 'stopped', reason = 'the program ended in mid-run' WHERE run = ? AND "
              "state NOT IN ('waiting', 'done', 'skipped', 'stopped')")
          .bind(run)
          .run();
      connection
          .cached(
              "UPDATE run SET state = 'interrupted', end_reason = 'the program ended in mid-run' WHERE id = "
              "?")
          .bind(run)
          .run();
      connection
          .cached(
              "INSERT INTO event (run, t_ns, kind, source, text) VALUES (?, ?, 'interrupted', 'record', "
              "'found in state running when the record was opened')")
          .bind(run, utc_ns)
          .run();
    }
    transaction.commit();
    return runs;
  } catch (const SqlFault& fault) {
    return base::Refusal{state_->path, to_failure(fault, state_->path).text};
  }
}

base::Outcome<std::vector<RunId>> Record::owed_safe_states() const {
  base::require(state_->write != nullptr && !state_->writer_lives, "owed_safe_states before any writer");
  try {
    std::vector<RunId> runs;
    Statement owed{state_->write->handle(), "SELECT run FROM owed_safe_state ORDER BY run"};
    while (owed.step()) runs.push_back(owed.integer(0));
    return runs;
  } catch (const SqlFault& fault) {
    return to_refusal(fault, state_->path);
  }
}

base::Outcome<void> Record::copy_to(const std::string& to) const {
  std::error_code none;
  if (fs::exists(to, none)) return base::Refusal{to, "exists already. Name a file that does not"};
  try {
    const auto connection = open_to_read(state_->path);
    Statement copy{connection->handle(), "VACUUM INTO ?"};
    copy.bind(to).run();
    return {};
  } catch (const SqlFault& fault) {
    fs::remove(to, none);
    return base::Refusal{to, "the copy of " + state_->path + " cannot be written: " + fault.text};
  }
}

}  // namespace loadstair::store
