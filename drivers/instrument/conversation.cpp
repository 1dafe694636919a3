#include "drivers/instrument/conversation.h"

#include <algorithm>

#include "analysis/base/number.h"
#include "drivers/dialect/scpi.h"
#include "drivers/dialect/text.h"

namespace loadstair::instrument {
namespace {

namespace net = boost::asio;
using link::Status;

constexpr std::int64_t kMilliNs = 1'000'000;
// Three characters at 9600 baud: the second of two equal lines has begun by then.
constexpr std::int64_t kPauseBetweenNs = 4 * kMilliNs;
// A line is silent after half a timeout, within these bounds.
constexpr std::int64_t kSilenceLeastNs = 20 * kMilliNs;
constexpr std::int64_t kSilenceMostNs = 500 * kMilliNs;
constexpr std::int64_t kWriteLeastNs = 1000 * kMilliNs;
// An instrument that is far too slow for its timeout still gets this many timeouts to say who it is.
constexpr std::int64_t kIdentityPatience = 5;

}  // namespace

Conversation::Conversation(net::any_io_executor executor, link::Clock& clock, const Profile& profile,
                           std::string wanted_identity, Tell tell)
    : executor_{std::move(executor)},
      clock_{clock},
      profile_{profile},
      wanted_identity_{std::move(wanted_identity)},
      tell_{std::move(tell)},
      write_ended_{clock, executor_} {}

void Conversation::begin(std::unique_ptr<link::Link> link) {
  link_ = std::move(link);
  identified_ = false;
  unsettled_ = false;
  resynchronising_ = false;
  thrown_away_ = 0;
  stranger_.clear();
}

void Conversation::close() {
  if (link_) link_->close();
  identified_ = false;
}

std::int64_t Conversation::timeout_ns() const {
  return std::max<std::int64_t>(static_cast<std::int64_t>(profile_.timeout_s * 1e9), kMilliNs);
}

bool Conversation::is_wanted(std::string_view line) const {
  if (line.empty() || !line.starts_with(wanted_identity_)) return false;
  if (!wanted_identity_.empty()) return true;
  // Anything will do but a late reply to a measurement.
  const auto element = dialect::split_reply(line).front();
  const auto quality =
      dialect::read_field(element, "", {profile_.overload_words, profile_.overload_at}).quality;
  return quality == dialect::Quality::invalid;
}

net::awaitable<bool> Conversation::write(std::string bytes) {
  const auto link = link_;
  if (!link) co_return false;
  const auto deadline_ns = clock_.now_ns() + std::max(kWriteLeastNs, timeout_ns());
  while (writing_ && clock_.now_ns() < deadline_ns) co_await write_ended_.wait_until(deadline_ns);
  if (writing_) co_return false;
  writing_ = true;
  const auto status = co_await link->write(std::move(bytes), deadline_ns);
  writing_ = false;
  write_ended_.notify();
  // Half a command may be on its way after a timeout: such a link is of no further use.
  if (status != Status::done) link->close();
  co_return status == Status::done;
}

net::awaitable<bool> Conversation::say(std::string command) {
  return write(std::move(command) + profile_.terminator);
}

net::awaitable<bool> Conversation::interject(std::string bytes) {
  if (!identified()) co_return false;
  co_return co_await write(std::move(bytes));
}

link::Wait Conversation::pause_between() {
  return clock_.sleep_until(clock_.now_ns() + kPauseBetweenNs);
}

net::awaitable<Conversation::Answer> Conversation::ask(std::string query) {
  Answer answer;
  const auto link = link_;
  if (!link) co_return answer;
  const auto unasked = co_await link->read_exactly(1, clock_.now_ns());
  if (unasked.status == Status::closed) co_return answer;
  if (unasked.status == Status::done) {
    unsettled_ = true;
    tell_(EventKind::garbage, "bytes came that nobody asked for, before " + query + " was sent");
    answer.end = End::out_of_step;
    co_return answer;
  }
  link->drain();  // what the system still holds is not an answer either
  unsettled_ = true;
  answer.sent_ns = clock_.now_ns();
  const bool written = co_await write(query + profile_.terminator);
  if (!written) co_return answer;
  auto reply = co_await link->read_line(profile_.terminator, answer.sent_ns + timeout_ns());
  answer.first_ns = reply.status == Status::done ? reply.first_ns : clock_.now_ns();
  answer.last_ns = reply.status == Status::done ? reply.last_ns : clock_.now_ns();
  switch (reply.status) {
    case Status::done:
      answer.end = End::answered;
      answer.text = std::move(reply.bytes);
      unsettled_ = false;
      break;
    case Status::too_long:
      answer.end = End::unreadable;
      break;
    case Status::timeout:
      answer.end = End::timeout;
      break;
    case Status::closed:
      break;
  }
  co_return answer;
}

net::awaitable<Conversation::Recognised> Conversation::ask_identity(std::int64_t deadline_ns) {
  const auto link = link_;
  if (!link) co_return Recognised::closed;
  const bool written = co_await write(profile_.identity_query + profile_.terminator);
  if (!written) co_return Recognised::closed;
  while (true) {
    const auto line = co_await link->read_line(profile_.terminator, deadline_ns);
    if (line.status == Status::closed) co_return Recognised::closed;
    if (line.status == Status::timeout) co_return stranger_.empty() ? Recognised::silent : Recognised::wrong;
    if (line.status == Status::too_long) continue;
    const auto text = dialect::trim(line.bytes);
    const bool matched = identified_ ? text == identity_ : is_wanted(text);
    if (matched) {
      identity_ = text;
      co_return Recognised::matched;
    }
    ++thrown_away_;
    // Bytes that are no text are noise, or come at another rate; they name nobody.
    const bool noise = std::any_of(text.begin(), text.end(), [](char c) { return c < ' ' || c > '~'; });
    if (!text.empty() && !noise) stranger_ = dialect::printable(text);
  }
}

net::awaitable<Conversation::Recognised> Conversation::identify() {
  const auto patience_ns = std::max(2 * timeout_ns(), 1000 * kMilliNs);
  auto recognised = Recognised::silent;
  // A second time where something else came: it may have been the end of an old reply, or a greeting.
  for (int round = 0; round < 2; ++round) {
    stranger_.clear();
    recognised = co_await ask_identity(clock_.now_ns() + patience_ns);
    if (recognised != Recognised::wrong) break;
    link_->drain();
  }
  if (recognised == Recognised::matched) identified_ = true;
  if (recognised == Recognised::wrong) identity_ = stranger_;
  co_return recognised;
}

net::awaitable<bool> Conversation::await_silence() {
  const auto link = link_;
  const auto silence_ns = std::clamp(timeout_ns() / 2, kSilenceLeastNs, kSilenceMostNs);
  const auto give_up_ns = clock_.now_ns() + 20 * silence_ns;
  while (clock_.now_ns() < give_up_ns) {
    const auto line = co_await link->read_line(profile_.terminator, clock_.now_ns() + silence_ns);
    if (line.status == Status::closed) co_return false;
    if (line.status != Status::timeout) {
      ++thrown_away_;
      continue;
    }
    // Bytes without an end, which read_line leaves where they are.
    const auto rest = co_await link->read_exactly(1, clock_.now_ns());
    if (rest.status != Status::done) co_return rest.status == Status::timeout;
    ++thrown_away_;
    link->drain();
  }
  co_return false;
}

net::awaitable<bool> Conversation::resynchronise() {
  if (!link_) co_return false;
  unsettled_ = true;
  resynchronising_ = true;
  const bool in_step = co_await silence_then_identity();
  resynchronising_ = false;
  co_return in_step;
}

net::awaitable<bool> Conversation::silence_then_identity() {
  const bool silent = co_await await_silence();
  if (!silent) co_return false;
  link_->drain();
  const auto recognised = co_await ask_identity(clock_.now_ns() + kIdentityPatience * timeout_ns());
  if (recognised != Recognised::matched) co_return false;
  unsettled_ = false;
  tell_(EventKind::resynchronised, "in step again; late lines thrown away: " +
                                       base::print_integer(static_cast<std::int64_t>(thrown_away_)));
  thrown_away_ = 0;
  co_return true;
}

}  // namespace loadstair::instrument
