// Building plain data from a document: typed getters whose complaints a person can act on. The first problem
// is kept, later getters then return their defaults in silence, so a reading function needs no branches for
// errors.
#pragma once

#include <array>
#include <optional>
#include <span>
#include <string>
#include <string_view>
#include <utility>
#include <vector>

#include "analysis/base/outcome.h"
#include "analysis/base/require.h"
#include "drivers/document/document.h"

namespace loadstair::document {

/// What one kind of object may hold. `name` with its article, as messages say it: "a channel".
struct Form {
  std::string_view name;
  std::span<const std::string_view> keys;
};

/// The first problem found in one file.
class Problem {
 public:
  explicit Problem(std::string file) : file_{std::move(file)} {}

  /// Keeps the problem unless there is one already.
  void report(Place place, std::string reason);
  void keep(const base::Refusal& refusal);
  [[nodiscard]] bool found() const { return refusal_.has_value(); }
  /// Precondition: found().
  [[nodiscard]] const base::Refusal& refusal() const { return refusal_.value(); }
  [[nodiscard]] const std::string& file() const { return file_; }

 private:
  std::string file_;
  std::optional<base::Refusal> refusal_;
};

/// Magnitudes beyond this are slips, and would overflow in later arithmetic.
inline constexpr double kFarthest = 1e15;

/// The allowed span of a number. `exclusive_low`: the low end itself is not allowed.
struct Bounds {
  double low = -kFarthest;
  double high = kFarthest;
  bool exclusive_low = false;
};
inline constexpr Bounds kAnyNumber{};
inline constexpr Bounds kPositive{0.0, kFarthest, true};
inline constexpr Bounds kNotNegative{0.0, kFarthest, false};

/// One word of a list to choose from, and what it stands for.
template <class T>
struct Choice {
  std::string_view word;
  T value;
};

/// Reads the members of one object. Every key asked for must be in the form (a promise of our own code).
/// Lives no longer than the value, the form and the problem it was given.
class ObjectReader {
 public:
  /// Reports a value that is no object, and keys that the form does not have, naming the nearest one.
  ObjectReader(const Value& value, const Form& form, Problem& problem);

  [[nodiscard]] bool has(std::string_view key) const { return find(key) != nullptr; }
  /// The value under the key; nullptr when it is not there.
  [[nodiscard]] const Value* find(std::string_view key) const;
  /// Place of the value under the key, or of the object when it is not there.
  [[nodiscard]] Place place_of(std::string_view key) const;
  /// Place of the object itself.
  [[nodiscard]] Place place() const { return value_->place; }

  // Required members. `example` shows what would be right: "\"unit\": \"V\"".
  [[nodiscard]] std::string text(std::string_view key, std::string_view example);
  [[nodiscard]] double number(std::string_view key, const Bounds& bounds, std::string_view example);
  [[nodiscard]] const Value* required(std::string_view key, Type type, std::string_view example);

  // Members that may be left out.
  [[nodiscard]] std::string text_or(std::string_view key, std::string_view otherwise);
  [[nodiscard]] double number_or(std::string_view key, const Bounds& bounds, double otherwise);
  [[nodiscard]] int integer_or(std::string_view key, int low, int high, int otherwise);
  [[nodiscard]] bool flag_or(std::string_view key, bool otherwise);
  [[nodiscard]] std::optional<double> maybe_number(std::string_view key, const Bounds& bounds);
  [[nodiscard]] std::optional<bool> maybe_flag(std::string_view key);
  /// nullptr when left out or of another type (then reported).
  [[nodiscard]] const Value* maybe(std::string_view key, Type type);
  [[nodiscard]] std::vector<std::string> texts_or_empty(std::string_view key);
  [[nodiscard]] std::vector<double> numbers_or_empty(std::string_view key, const Bounds& bounds);

  /// One word of a list; `otherwise` when left out, a complaint when left out and nullopt.
  template <class T>
  [[nodiscard]] T one_of(std::string_view key, std::span<const Choice<T>> choices,
                         std::optional<T> otherwise = std::nullopt) {
    std::vector<std::string_view> words;
    for (const auto& choice : choices) words.push_back(choice.word);
    const auto at = word_of(key, words, otherwise.has_value());
    if (at.has_value()) return choices[*at].value;
    return otherwise.value_or(choices.front().value);
  }

  /// A complaint at the value under the key (or at the object when the key is not there).
  void complain(std::string_view key, std::string reason);
  [[nodiscard]] Problem& problem() { return *problem_; }
  [[nodiscard]] std::string_view form_name() const { return form_->name; }

 private:
  [[nodiscard]] std::optional<std::size_t> word_of(std::string_view key,
                                                   std::span<const std::string_view> words, bool may_miss);
  [[nodiscard]] bool within(std::string_view key, const Value& value, const Bounds& bounds);

  const Value* value_;
  const Form* form_;
  Problem* problem_;
};

/// The candidate that `written` was most likely meant to be; nullopt when none is near (more edits than a
/// third of its length, at least two; a swap of neighbours counts as one).
[[nodiscard]] std::optional<std::string_view> nearest(std::string_view written,
                                                      std::span<const std::string_view> candidates);

/// "; did you mean "X"?" when one is near, else "; known are A, B, C" ("; the only one is A", "; there are
/// none").
[[nodiscard]] std::string suggest(std::string_view written, std::span<const std::string_view> candidates);

/// "voltage, current or power".
[[nodiscard]] std::string join_words(std::span<const std::string_view> words);

}  // namespace loadstair::document
