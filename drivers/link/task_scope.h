// The owner of coroutines that run beside the one that starts them. No task without an owner, no error lost.
#pragma once

#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <exception>
#include <functional>
#include <memory>

#include "drivers/link/clock.h"

namespace loadstair::link {

/// Starts tasks, hears of their failures, cancels them and waits for their end. One executor, no locks.
///
/// Cancelling a task ends the wait it is in; its next co_await then throws operation_aborted, which ends it
/// and is not a failure. A task that must finish something first (a safe state) switches that off with
/// `co_await boost::asio::this_coro::throw_if_cancelled(false)`, or is not cancelled but told to stop.
///
/// What a task refers to must outlive the scope's `close`; a scope that is destroyed without `close` cancels
/// its tasks but cannot wait for them.
class TaskScope {
 public:
  /// Called on the executor with what left a task; it must not throw. Tasks beside the failed one go on:
  /// whether to cancel them is the owner's decision.
  using OnFailure = std::function<void(std::exception_ptr)>;

  TaskScope(boost::asio::any_io_executor executor, OnFailure on_failure);
  ~TaskScope();
  TaskScope(const TaskScope&) = delete;
  TaskScope& operator=(const TaskScope&) = delete;

  /// Starts `task` at the executor's next turn. After `cancel` or `close` it is ended before its first step.
  void spawn(boost::asio::awaitable<void> task);

  /// Asks every task to end, and every later one. Returns at once; callable from within a task.
  void cancel();

  /// Waits until no task is left, without cancelling.
  [[nodiscard]] Wait join();

  /// `cancel`, then `join`. Must not be called from within a task of this scope: it would wait for itself.
  [[nodiscard]] Wait close();

  /// Tasks that have not ended yet.
  [[nodiscard]] std::size_t size() const;

 private:
  struct State;
  std::shared_ptr<State> state_;
};

}  // namespace loadstair::link
