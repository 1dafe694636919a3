#include "daemon/recorder/window.h"

#include <algorithm>

#include "analysis/base/require.h"

namespace loadstair::recorder {
namespace {

template <class T>
void drop_front(std::vector<T>& column, std::size_t count) {
  column.erase(column.begin(), column.begin() + static_cast<std::ptrdiff_t>(count));
}

}  // namespace

void Window::push(const Point& point) {
  t_ns_.push_back(point.t_ns);
  half_width_ns_.push_back(point.half_width_ns);
  arrived_ns_.push_back(point.arrived_ns);
  value_.push_back(point.value);
  raw_.push_back(point.raw);
  flags_.push_back(point.flags);
  if (size() > most_) ++head_;
  if (head_ < most_) return;
  drop_front(t_ns_, head_);
  drop_front(half_width_ns_, head_);
  drop_front(arrived_ns_, head_);
  drop_front(value_, head_);
  drop_front(raw_, head_);
  drop_front(flags_, head_);
  head_ = 0;
}

void Window::clear() {
  t_ns_.clear();
  half_width_ns_.clear();
  arrived_ns_.clear();
  value_.clear();
  raw_.clear();
  flags_.clear();
  head_ = 0;
}

Point Window::back() const {
  base::require(!empty(), "a window is asked for its last reading only when it has one");
  return {t_ns_.back(), half_width_ns_.back(), arrived_ns_.back(), value_.back(), raw_.back(), flags_.back()};
}

std::size_t Window::first_from(std::int64_t t_ns) const {
  // Instants may step back a little when a meter's half-width changes, so the search goes from the end.
  const auto times = this->t_ns();
  std::size_t first = times.size();
  while (first > 0 && times[first - 1] >= t_ns) --first;
  return first;
}

}  // namespace loadstair::recorder
