// store: the record of a bench, one SQLite file: runs, steps, readings, replies, captures, events,
// amendments. Not for converting or judging what an instrument said: the record holds it as it came.
#pragma once

#include <chrono>
#include <cstdint>
#include <functional>
#include <memory>
#include <optional>
#include <string>
#include <vector>

#include "analysis/base/outcome.h"
#include "daemon/store/items.h"

namespace loadstair::store {

class Reader;

/// The newest schema this program writes and reads (PRAGMA user_version).
inline constexpr int kSchema = 1;

enum class Mode {
  read,   ///< an existing record, never written
  write,  ///< created when it is not there; locked against other writers
};

/// An open record. Movable. One thread at a time, but for `reader()`, which any thread may call.
class Record {
 public:
  /// Opens `path`.
  /// Refusal (place: path): not there (read), not a Loadstair record, written by a newer program, locked by
  /// another writer (its process id is named), cannot be created, damaged; each with what to do.
  [[nodiscard]] static base::Outcome<Record> open(const std::string& path, Mode mode);

  Record(Record&&) noexcept;
  Record& operator=(Record&&) noexcept;
  ~Record();  ///< checkpoints when it was open for writing and no writer failed

  [[nodiscard]] const std::string& path() const;

  /// A read-only connection of its own.
  [[nodiscard]] base::Outcome<Reader> reader() const;

  /// Runs left in state running by a crash become interrupted; steps in progress become stopped.
  /// utc_ns   when this was found out; becomes an event of the run.
  /// Returns: the runs concerned. Precondition: Mode::write and no Writer yet.
  [[nodiscard]] base::Outcome<std::vector<RunId>> mark_interrupted(std::int64_t utc_ns);

  /// Runs, in whatever state, after which nobody has said that the bench is safe (SafeStateItem): their
  /// program ended before it could make it safe, or an instrument did not confirm it. Returns: in order of
  /// their numbers. Precondition: Mode::write and no Writer yet.
  [[nodiscard]] base::Outcome<std::vector<RunId>> owed_safe_states() const;

  /// A copy in one file without a journal (VACUUM INTO); `to` must not exist.
  [[nodiscard]] base::Outcome<void> copy_to(const std::string& to) const;

  class Connection;  ///< of this room only
 private:
  friend class Writer;
  struct State;
  explicit Record(std::unique_ptr<State> state);
  std::unique_ptr<State> state_;
};

/// Why the record cannot be written just now.
struct Failure {
  enum class Kind { disk_full, read_only, io_error, other };
  Kind kind = Kind::other;
  std::string text;  ///< for a person: what failed, on which file, what to do
  bool operator==(const Failure&) const = default;
};

struct Health {
  std::uint64_t posted = 0;     ///< sequence number of the last item posted
  std::uint64_t committed = 0;  ///< ... of the last item that is on the disk
  std::optional<Failure> failure;
  std::chrono::steady_clock::time_point last_commit{};
  std::chrono::nanoseconds slowest_commit{0};  ///< longest time from post to commit so far
};

struct WriterOptions {
  bool threaded = true;  ///< false: no thread; commits on flush() or when `batch_items` are waiting
  std::chrono::milliseconds commit_after{80};  ///< age of the oldest item at which a batch is committed
  std::size_t batch_items = 20000;             ///< a batch this large is committed at once
  std::chrono::milliseconds retry_after{250};  ///< after a failed commit
  std::int64_t utc_offset_ns = 0;  ///< for items of no run, or of a run that this writer did not begin
  /// Called on the writer's thread (threaded) or in flush(); must return soon and not call the writer.
  std::function<void(const Failure&)> on_failure;          ///< once per failure, not per retry
  std::function<void()> on_recovery;                       ///< the first commit after a failure
  std::function<void(std::uint64_t committed)> on_commit;  ///< after each commit
};

/// Owns the one write connection and the one thread that uses it. Items are written in the order in which
/// they were posted; a batch is on the disk (synchronous=FULL) before it counts as committed. A batch that
/// fails stays and is tried again: nothing committed is lost, nothing posted is dropped while the writer
/// lives.
class Writer {
 public:
  /// `record` must be open for writing and outlive the writer; one writer a record.
  [[nodiscard]] static base::Outcome<std::unique_ptr<Writer>> start(Record& record,
                                                                    WriterOptions options = {});

  Writer(const Writer&) = delete;
  Writer& operator=(const Writer&) = delete;
  ~Writer();  ///< close() with its default deadline, the outcome ignored

  /// Hands over an item; never waits beyond a mutex. Returns its sequence number (from 1).
  /// An item that the record refuses for good (a change to a sealed run, an unknown run) is dropped with an
  /// event.
  std::uint64_t post(Item item);

  /// Begins a run: gives it the next number and posts it.
  [[nodiscard]] RunId begin_run(RunStart start);

  /// Commits as soon as possible what was posted before; returns when it is on the disk.
  /// Refusal: the failure, or the deadline passed. The items stay queued.
  [[nodiscard]] base::Outcome<void> flush(std::chrono::milliseconds deadline = std::chrono::seconds{5});

  /// Drains, checkpoints the journal and stops the thread. Refusal: how many items are not on the disk, and
  /// why.
  [[nodiscard]] base::Outcome<void> close(std::chrono::milliseconds deadline = std::chrono::seconds{5});

  [[nodiscard]] Health health() const;

 private:
  struct State;
  explicit Writer(std::unique_ptr<State> state);
  std::unique_ptr<State> state_;
};

}  // namespace loadstair::store
