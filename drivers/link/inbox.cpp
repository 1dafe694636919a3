#include "drivers/link/inbox.h"

#include <algorithm>

namespace loadstair::link {

void Inbox::append(std::string_view bytes) {
  if (bytes.empty() || ended_) return;
  bytes_.append(bytes);
  const auto t_ns = clock_.now_ns();
  const auto end = consumed_ + size();
  if (!stamps_.empty() && stamps_.back().t_ns == t_ns) {
    stamps_.back().end = end;
  } else {
    stamps_.push_back({end, t_ns});
  }
  arrived_.notify();
}

void Inbox::end() {
  ended_ = true;
  arrived_.notify();
}

void Inbox::clear() {
  discard(size());
}

void Inbox::discard(std::size_t count) {
  head_ += count;
  consumed_ += count;
  searched_ = 0;
  while (!stamps_.empty() && stamps_.front().end <= consumed_) stamps_.pop_front();
  if (head_ == bytes_.size()) {
    bytes_.clear();
    head_ = 0;
  } else if (head_ > kLineLimit) {
    bytes_.erase(0, head_);
    head_ = 0;
  }
}

std::int64_t Inbox::instant_of(std::size_t offset) const {
  const auto place = consumed_ + offset;
  const auto stamp = std::upper_bound(stamps_.begin(), stamps_.end(), place,
                                      [](std::uint64_t at, const Stamp& s) { return at < s.end; });
  return stamp == stamps_.end() ? 0 : stamp->t_ns;
}

Received Inbox::take(std::size_t count) {
  Received received{Status::done, bytes_.substr(head_, count), instant_of(0), instant_of(count - 1)};
  discard(count);
  return received;
}

std::optional<Received> Inbox::take_line(std::string_view terminator) {
  const auto unread = std::string_view{bytes_}.substr(head_);
  const auto at = unread.find(terminator, searched_);
  if (at == std::string_view::npos) {
    // A terminator may have arrived in part.
    const auto keep = terminator.size() - 1;
    searched_ = unread.size() > keep ? unread.size() - keep : 0;
    if (searched_ > kLineLimit) {
      throwing_away_ = true;
      discard(searched_);
    }
    return std::nullopt;
  }
  if (throwing_away_ || at > kLineLimit) {
    Received too_long{Status::too_long, {}, instant_of(0), instant_of(at + terminator.size() - 1)};
    throwing_away_ = false;
    discard(at + terminator.size());
    return too_long;
  }
  auto line = take(at + terminator.size());
  line.bytes.resize(at);
  if (line.bytes.ends_with('\r')) line.bytes.pop_back();
  return line;
}

boost::asio::awaitable<Received> Inbox::read_line(std::string terminator, std::int64_t deadline_ns) {
  if (terminator.empty()) terminator = "\n";
  searched_ = 0;  // the line before may have had another terminator
  while (true) {
    if (auto line = take_line(terminator)) co_return std::move(*line);
    if (ended_) co_return Received{};
    if (clock_.now_ns() >= deadline_ns) co_return Received{.status = Status::timeout};
    co_await arrived_.wait_until(deadline_ns);
  }
}

boost::asio::awaitable<Received> Inbox::read_exactly(std::size_t count, std::int64_t deadline_ns) {
  count = std::max<std::size_t>(count, 1);
  while (true) {
    if (size() >= count) co_return take(count);
    if (ended_) co_return Received{};
    if (clock_.now_ns() >= deadline_ns) co_return Received{.status = Status::timeout};
    co_await arrived_.wait_until(deadline_ns);
  }
}

}  // namespace loadstair::link
