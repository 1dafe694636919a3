#include "drivers/link/task_scope.h"

#include <boost/asio/as_tuple.hpp>
#include <boost/asio/bind_cancellation_slot.hpp>
#include <boost/asio/cancellation_signal.hpp>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/error.hpp>
#include <boost/asio/steady_timer.hpp>
#include <boost/asio/use_awaitable.hpp>
#include <boost/system/system_error.hpp>
#include <unordered_map>
#include <vector>

namespace loadstair::link {

using boost::asio::cancellation_signal;
using boost::asio::cancellation_type;

struct TaskScope::State {
  State(boost::asio::any_io_executor executor_of_tasks, OnFailure callback)
      : executor{std::move(executor_of_tasks)},
        on_failure{std::move(callback)},
        empty{executor, boost::asio::steady_timer::time_point::max()} {}

  boost::asio::any_io_executor executor;
  OnFailure on_failure;
  boost::asio::steady_timer empty;  ///< cancelled when the last task has ended
  std::unordered_map<std::uint64_t, std::shared_ptr<cancellation_signal>> tasks;
  std::uint64_t next = 0;
  bool cancelled = false;

  void ended(std::uint64_t task, const std::exception_ptr& failure) {
    tasks.erase(task);
    if (failure && !(cancelled && is_cancellation(failure)) && on_failure) on_failure(failure);
    if (tasks.empty()) empty.cancel();
  }

  static bool is_cancellation(const std::exception_ptr& failure) {
    try {
      std::rethrow_exception(failure);
    } catch (const boost::system::system_error& error) {
      return error.code() == boost::asio::error::operation_aborted;
    } catch (...) {
      return false;
    }
  }

  /// A signal that is given before a task's first turn is lost, hence the look at the flag.
  static boost::asio::awaitable<void> begin(std::shared_ptr<State> state, boost::asio::awaitable<void> task) {
    if (state->cancelled) co_return;
    co_await std::move(task);
  }

  void cancel() {
    cancelled = true;
    // A signal may end its task at once and change the map.
    std::vector<std::shared_ptr<cancellation_signal>> signals;
    for (const auto& [task, signal] : tasks) signals.push_back(signal);
    for (const auto& signal : signals) signal->emit(cancellation_type::terminal);
  }
};

TaskScope::TaskScope(boost::asio::any_io_executor executor, OnFailure on_failure)
    : state_{std::make_shared<State>(std::move(executor), std::move(on_failure))} {}

TaskScope::~TaskScope() {
  state_->on_failure = nullptr;  // its owner is going too
  state_->cancel();
}

void TaskScope::spawn(boost::asio::awaitable<void> task) {
  const auto number = state_->next++;
  const auto signal = std::make_shared<cancellation_signal>();
  state_->tasks.emplace(number, signal);
  boost::asio::co_spawn(
      state_->executor, State::begin(state_, std::move(task)),
      boost::asio::bind_cancellation_slot(
          signal->slot(), [state = state_, number, signal](const std::exception_ptr& failure) {
            state->ended(number, failure);
          }));
}

void TaskScope::cancel() {
  state_->cancel();
}

Wait TaskScope::join() {
  const auto state = state_;
  while (!state->tasks.empty()) {
    co_await state->empty.async_wait(boost::asio::as_tuple(boost::asio::use_awaitable));
  }
}

Wait TaskScope::close() {
  cancel();
  return join();
}

std::size_t TaskScope::size() const {
  return state_->tasks.size();
}

}  // namespace loadstair::link
