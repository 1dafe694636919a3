// base: the ground floor every room stands on: outcomes, numbers as text, units. Standard library only.
// Not for anything that knows a meter, a waveform or a file.
#pragma once

#include <optional>
#include <string>
#include <utility>
#include <variant>

namespace loadstair::base {

/// Why something was refused.
/// place   where it happened, as exact as known ("bench.json:12:7", "row 4, column 2", "channel output
/// power"). reason  what came instead and what would be right; one or two lines that a person can act on.
struct Refusal {
  std::string place;
  std::string reason;

  /// "place: reason", or the reason alone when no place is known.
  [[nodiscard]] std::string text() const { return place.empty() ? reason : place + ": " + reason; }
  bool operator==(const Refusal&) const = default;
};

/// A value, or a refusal. What parsers of foreign bytes and analysis return; never thrown.
template <class T>
class [[nodiscard]] Outcome {
 public:
  Outcome(T value) : state_{std::in_place_index<0>, std::move(value)} {}  // NOLINT: a value is an outcome
  Outcome(Refusal refusal) : state_{std::in_place_index<1>, std::move(refusal)} {}  // NOLINT: so is a refusal

  [[nodiscard]] bool ok() const { return state_.index() == 0; }
  explicit operator bool() const { return ok(); }

  /// The value. Precondition: ok(); std::bad_variant_access otherwise.
  [[nodiscard]] T& value() & { return std::get<0>(state_); }
  [[nodiscard]] const T& value() const& { return std::get<0>(state_); }
  [[nodiscard]] T&& value() && { return std::get<0>(std::move(state_)); }
  T& operator*() & { return value(); }
  const T& operator*() const& { return value(); }
  T* operator->() { return &value(); }
  const T* operator->() const { return &value(); }

  /// The refusal. Precondition: !ok().
  [[nodiscard]] const Refusal& refusal() const { return std::get<1>(state_); }

 private:
  std::variant<T, Refusal> state_;
};

/// Success without a value, or a refusal.
template <>
class [[nodiscard]] Outcome<void> {
 public:
  Outcome() = default;
  Outcome(Refusal refusal) : refusal_{std::move(refusal)} {}  // NOLINT: a refusal is an outcome

  [[nodiscard]] bool ok() const { return !refusal_.has_value(); }
  explicit operator bool() const { return ok(); }
  [[nodiscard]] const Refusal& refusal() const { return refusal_.value(); }

 private:
  std::optional<Refusal> refusal_;
};

}  // namespace loadstair::base
