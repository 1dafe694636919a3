#include <condition_variable>
#include <deque>
#include <list>
#include <mutex>
#include <thread>

#include "analysis/base/number.h"
#include "analysis/base/require.h"
#include "daemon/store/insert.h"
#include "daemon/store/record.h"
#include "daemon/store/state.h"

namespace loadstair::store {
namespace {

using SteadyClock = std::chrono::steady_clock;

struct Pending {
  std::uint64_t number = 0;
  SteadyClock::time_point posted;
  Item item;
};

struct PendingCapture {
  std::uint64_t number = 0;
  std::unique_ptr<OpenCapture> open;
};

bool is_seal(const Pending& pending) {
  return std::holds_alternative<SealItem>(pending.item);
}

}  // namespace

struct Writer::State {
  State(Record::State& record_state, WriterOptions chosen)
      : record{record_state},
        options{std::move(chosen)},
        inserter{*record_state.write, options.utc_offset_ns} {}

  Record::State& record;
  WriterOptions options;
  Inserter inserter;

  // Shared between posting threads and the writer's, under `mutex`.
  mutable std::mutex mutex;
  std::condition_variable work, done;
  std::deque<Pending> queue;
  RunId next_run = 1;
  Health health;
  std::uint64_t flush_to = 0;
  std::uint64_t failed_attempts = 0;
  bool retry_now = false;
  bool stop = false;     ///< end when all is written
  bool give_up = false;  ///< end now
  bool closed = false;

  // Of the writing thread alone.
  std::deque<Pending> batch;
  std::list<PendingCapture> captures;
  std::vector<std::string> refused;

  std::thread thread;

  bool due(SteadyClock::time_point now) const {
    return !queue.empty() && (stop || flush_to > health.committed || queue.size() >= options.batch_items ||
                              now >= queue.front().posted + options.commit_after);
  }

  /// Moves what is due into the batch, up to a seal: what a seal digests must be written before it.
  void take() {
    if (!batch.empty()) return;
    while (!queue.empty() && batch.size() < options.batch_items) {
      if (is_seal(queue.front()) && !batch.empty()) break;
      batch.push_back(std::move(queue.front()));
      queue.pop_front();
    }
  }

  void write_batch();
  void write_chunk();
  std::optional<SqlFault> attempt();
  bool step(std::unique_lock<std::mutex>& lock);
  void account(SteadyClock::time_point oldest);
  void loop();
  bool wait_for_work(std::unique_lock<std::mutex>& lock);
  [[nodiscard]] std::uint64_t unwritten() const { return health.posted - health.committed; }
};

/// One transaction for the whole batch. An item that its table refuses is left out and told as an event; any
/// other fault undoes the batch, which stays for the next attempt.
void Writer::State::write_batch() {
  refused.clear();
  std::list<PendingCapture> opened;
  Transaction transaction{*record.write, true};
  for (const Pending& pending : batch) {
    try {
      std::unique_ptr<OpenCapture> rest;
      inserter.insert(pending.item, rest);
      if (rest) opened.push_back({pending.number, std::move(rest)});
    } catch (const SqlFault& fault) {
      if (!fault.refused_row()) throw;
      refused.push_back("not recorded, since " + fault.text);
    }
  }
  for (const std::string& text : refused) inserter.insert_own_event(text);
  transaction.commit();
  captures.splice(captures.end(), opened);
}

/// The next chunk of the oldest open capture, in a transaction of its own.
void Writer::State::write_chunk() {
  OpenCapture next = *captures.front().open;
  Transaction transaction{*record.write, true};
  bool complete = true;
  try {
    complete = inserter.insert_chunk(next);
  } catch (const SqlFault& fault) {
    if (!fault.refused_row()) throw;  // a row that is refused stays refused: the capture stays incomplete
  }
  transaction.commit();
  *captures.front().open = next;
  if (complete) captures.pop_front();
}

std::optional<SqlFault> Writer::State::attempt() {
  try {
    const bool seal_waits = !batch.empty() && is_seal(batch.front()) && !captures.empty();
    if (!batch.empty() && !seal_waits) {
      write_batch();
      batch.clear();
    } else if (!captures.empty()) {
      write_chunk();
    }
    return std::nullopt;
  } catch (const SqlFault& fault) {
    inserter.forget();
    return fault;
  } catch (const std::exception& error) {
    inserter.forget();
    return SqlFault{SQLITE_ERROR, error.what()};
  }
}

/// What is on the disk now: all that was taken, but for captures that are not whole.
void Writer::State::account(SteadyClock::time_point oldest) {
  std::uint64_t committed = health.posted;
  if (!queue.empty()) committed = queue.front().number - 1;
  if (!batch.empty()) committed = batch.front().number - 1;
  if (!captures.empty()) committed = std::min(committed, captures.front().number - 1);
  health.committed = committed;
  health.last_commit = SteadyClock::now();
  health.slowest_commit =
      std::max(health.slowest_commit, std::chrono::nanoseconds{health.last_commit - oldest});
}

/// One attempt with its accounting. Returns: it succeeded.
bool Writer::State::step(std::unique_lock<std::mutex>& lock) {
  // A capture's chunks give way to readings that are due; the others wait for them.
  if (captures.empty() || due(SteadyClock::now())) take();
  retry_now = false;
  const SteadyClock::time_point oldest = batch.empty() ? SteadyClock::now() : batch.front().posted;
  lock.unlock();
  const std::optional<SqlFault> fault = attempt();
  lock.lock();
  if (fault) {
    ++failed_attempts;
    const Failure failure = to_failure(*fault, record.path);
    const bool is_new = health.failure != failure;
    health.failure = failure;
    done.notify_all();
    if (is_new && options.on_failure) {
      lock.unlock();
      options.on_failure(failure);
      lock.lock();
    }
    return false;
  }
  const bool recovered = health.failure.has_value();
  health.failure.reset();
  account(oldest);
  const std::uint64_t committed = health.committed;
  done.notify_all();
  lock.unlock();
  if (recovered && options.on_recovery) options.on_recovery();
  if (options.on_commit) options.on_commit(committed);
  lock.lock();
  return true;
}

/// Waits until something can be written. Returns: false when the thread is to end.
bool Writer::State::wait_for_work(std::unique_lock<std::mutex>& lock) {
  if (health.failure) {
    const auto until = SteadyClock::now() + options.retry_after;
    work.wait_until(lock, until, [&] { return give_up || stop || retry_now; });
    if (stop && !give_up) work.wait_for(lock, std::chrono::milliseconds{20}, [&] { return give_up; });
    return !give_up;
  }
  while (!give_up) {
    if (!batch.empty() || !captures.empty()) return true;
    if (due(SteadyClock::now())) return true;
    if (stop && queue.empty()) return false;
    if (queue.empty()) {
      work.wait(lock);
    } else {
      work.wait_until(lock, queue.front().posted + options.commit_after);
    }
  }
  return false;
}

void Writer::State::loop() {
  std::unique_lock lock{mutex};
  while (wait_for_work(lock)) {
    step(lock);
  }
  done.notify_all();
}

Writer::Writer(std::unique_ptr<State> state) : state_{std::move(state)} {}

Writer::~Writer() {
  static_cast<void>(close());
}

base::Outcome<std::unique_ptr<Writer>> Writer::start(Record& record, WriterOptions options) {
  Record::State& record_state = *record.state_;
  if (record_state.mode != Mode::write) {
    return base::Refusal{record_state.path, "was opened for reading; open it for writing"};
  }
  base::require(!record_state.writer_lives, "one writer a record");
  auto state = std::make_unique<State>(record_state, std::move(options));
  try {
    Statement last{record_state.write->handle(), "SELECT coalesce(max(id), 0) FROM run"};
    if (last.step()) state->next_run = last.integer(0) + 1;
  } catch (const SqlFault& fault) {
    return to_refusal(fault, record_state.path);
  }
  record_state.writer_lives = true;
  if (state->options.threaded) state->thread = std::thread{[raw = state.get()] { raw->loop(); }};
  return std::unique_ptr<Writer>{new Writer{std::move(state)}};
}

std::uint64_t Writer::post(Item item) {
  State& state = *state_;
  std::unique_lock lock{state.mutex};
  if (state.closed) return 0;
  const std::uint64_t number = ++state.health.posted;
  state.queue.push_back({number, SteadyClock::now(), std::move(item)});
  const std::size_t waiting = state.queue.size();
  if (state.options.threaded) {
    if (waiting == 1 || waiting == state.options.batch_items) state.work.notify_one();
  } else if (waiting >= state.options.batch_items) {
    lock.unlock();
    static_cast<void>(flush());  // a failure stays in health() and the items in the queue
  }
  return number;
}

RunId Writer::begin_run(RunStart start) {
  RunId run = 0;
  {
    const std::lock_guard lock{state_->mutex};
    run = state_->next_run++;
  }
  post(RunBegin{run, std::move(start)});
  return run;
}

base::Outcome<void> Writer::flush(std::chrono::milliseconds deadline) {
  State& state = *state_;
  const auto until = SteadyClock::now() + deadline;
  std::unique_lock lock{state.mutex};
  const std::uint64_t wanted = state.health.posted;
  const std::uint64_t failed_before = state.failed_attempts;
  state.flush_to = std::max(state.flush_to, wanted);
  if (!state.options.threaded) {
    while (state.health.committed < wanted) {
      if (!state.step(lock)) return base::Refusal{state.record.path, state.health.failure->text};
    }
    return {};
  }
  state.retry_now = true;
  state.work.notify_one();
  state.done.wait_until(lock, until, [&] {
    return state.health.committed >= wanted || state.failed_attempts > failed_before || state.closed;
  });
  if (state.health.committed >= wanted) return {};
  if (state.health.failure) return base::Refusal{state.record.path, state.health.failure->text};
  return base::Refusal{state.record.path, "not on the disk within " + base::print_integer(deadline.count()) +
                                              " ms; the disk is slow, the items are still queued"};
}

base::Outcome<void> Writer::close(std::chrono::milliseconds deadline) {
  State& state = *state_;
  const auto until = SteadyClock::now() + deadline;
  {
    const std::lock_guard lock{state.mutex};
    if (state.closed) return {};
  }
  if (state.options.threaded) {
    std::unique_lock lock{state.mutex};
    state.stop = true;
    state.flush_to = state.health.posted;
    state.work.notify_one();
    state.done.wait_until(lock, until, [&] { return state.health.committed >= state.flush_to; });
    state.give_up = true;
    state.work.notify_one();
    lock.unlock();
    state.thread.join();
  } else {
    static_cast<void>(flush(deadline));
  }
  const std::lock_guard lock{state.mutex};
  state.closed = true;
  state.record.writer_lives = false;
  if (const std::uint64_t lost = state.unwritten(); lost > 0) {
    state.record.failed = true;
    return base::Refusal{state.record.path,
                         base::print_integer(static_cast<std::int64_t>(lost)) +
                             " items are not on the disk: " +
                             (state.health.failure ? state.health.failure->text : "no time was left")};
  }
  try {
    state.record.write->execute("PRAGMA wal_checkpoint(TRUNCATE)");
  } catch (const SqlFault& fault) {
    return base::Refusal{state.record.path, to_failure(fault, state.record.path).text};
  }
  return {};
}

Health Writer::health() const {
  const std::lock_guard lock{state_->mutex};
  return state_->health;
}

}  // namespace loadstair::store
