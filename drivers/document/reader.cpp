#include "drivers/document/reader.h"

#include <algorithm>
#include <cmath>

#include "analysis/base/number.h"

namespace loadstair::document {
namespace {

std::string quoted(std::string_view text) {
  return print_text(text);
}

// A value as it may be shown in a message, cut where long.
std::string show(const Value& value) {
  switch (value.type) {
    case Type::number:
      return value.text.empty() ? base::print_number(value.number) : value.text;
    case Type::text:
      return value.text.size() > 40 ? "a long text" : quoted(value.text);
    case Type::boolean:
      return value.boolean ? "true" : "false";
    default:
      return std::string{name_of(value.type)};
  }
}

// Optimal string alignment: insertions, deletions, replacements and swaps of neighbours cost one each
// (Damerau 1964, in the restricted form).
std::size_t distance(std::string_view a, std::string_view b) {
  std::vector<std::size_t> before_last(b.size() + 1), last(b.size() + 1), row(b.size() + 1);
  for (std::size_t j = 0; j <= b.size(); ++j) last[j] = j;
  for (std::size_t i = 1; i <= a.size(); ++i) {
    row[0] = i;
    for (std::size_t j = 1; j <= b.size(); ++j) {
      const std::size_t cost = a[i - 1] == b[j - 1] ? 0 : 1;
      row[j] = std::min({last[j] + 1, row[j - 1] + 1, last[j - 1] + cost});
      const bool swapped = i > 1 && j > 1 && a[i - 1] == b[j - 2] && a[i - 2] == b[j - 1];
      if (swapped) row[j] = std::min(row[j], before_last[j - 2] + 1);
    }
    before_last = last;
    last = row;
  }
  return last[b.size()];
}

// Whole numbers without exponent: 4000000, not 4e+06.
std::string plain(double value) {
  constexpr double kPlainBelow = 1e9;
  if (value == std::floor(value) && std::fabs(value) < kPlainBelow) {
    return base::print_integer(static_cast<std::int64_t>(value));
  }
  return base::print_number(value);
}

// Keys end in their unit: "poll_s" is in seconds.
std::string_view unit_of_key(std::string_view key) {
  constexpr std::pair<std::string_view, std::string_view> kEndings[] = {
      {"_s", " seconds"}, {"_percent", " %"}, {"_ohm", " ohm"}, {"_v", " V"},   {"_a", " A"},
      {"_w", " W"},       {"_hz", " Hz"},     {"_k", " K"},     {"_c", " degC"}};
  for (const auto& [ending, unit] : kEndings) {
    if (key.ends_with(ending)) return unit;
  }
  return "";
}

std::string describe(const Bounds& bounds, double value) {
  // An end so far away goes without saying, unless it was passed.
  const bool has_low = bounds.low > -kFarthest || value < bounds.low;
  const bool has_high = bounds.high < kFarthest || value > bounds.high;
  const std::string low = plain(bounds.low);
  if (has_low && has_high) {
    return (bounds.exclusive_low ? "above " + low + " and at most " : "from " + low + " to ") +
           plain(bounds.high);
  }
  if (has_high) return "at most " + plain(bounds.high);
  return (bounds.exclusive_low ? "greater than " : "at least ") + low;
}

}  // namespace

void Problem::report(Place place, std::string reason) {
  if (!refusal_) refusal_ = base::Refusal{print_place(file_, place), std::move(reason)};
}

void Problem::keep(const base::Refusal& refusal) {
  if (!refusal_) refusal_ = refusal;
}

ObjectReader::ObjectReader(const Value& value, const Form& form, Problem& problem)
    : value_{&value}, form_{&form}, problem_{&problem} {
  if (value.type != Type::object) {
    problem.report(value.place, std::string{form.name} + " is an object {...}, not " + show(value));
    return;
  }
  for (const Member& member : value.members) {
    if (std::find(form.keys.begin(), form.keys.end(), member.name) != form.keys.end()) continue;
    problem.report(member.place, "unknown key " + quoted(member.name) + " in " + std::string{form.name} +
                                     suggest(member.name, form.keys));
    return;
  }
}

const Value* ObjectReader::find(std::string_view key) const {
  base::require(std::find(form_->keys.begin(), form_->keys.end(), key) != form_->keys.end(),
                "a reader asks only for keys of its form");
  const Member* member = value_->find(key);
  return member == nullptr ? nullptr : &member->value;
}

Place ObjectReader::place_of(std::string_view key) const {
  const Value* value = find(key);
  return value == nullptr ? value_->place : value->place;
}

void ObjectReader::complain(std::string_view key, std::string reason) {
  problem_->report(place_of(key), std::move(reason));
}

const Value* ObjectReader::maybe(std::string_view key, Type type) {
  const Value* value = find(key);
  if (value == nullptr) return nullptr;
  if (value->type == type) return value;
  problem_->report(value->place,
                   quoted(key) + " must be " + std::string{name_of(type)} + ", not " + show(*value));
  return nullptr;
}

const Value* ObjectReader::required(std::string_view key, Type type, std::string_view example) {
  if (find(key) == nullptr) {
    problem_->report(value_->place, std::string{form_->name} + " needs " + quoted(key) +
                                        "; add, for example, " + std::string{example});
  }
  return maybe(key, type);
}

std::string ObjectReader::text(std::string_view key, std::string_view example) {
  const Value* value = required(key, Type::text, example);
  if (value == nullptr) return {};
  if (value->text.empty()) {
    problem_->report(value->place, quoted(key) + " is empty; write, for example, " + std::string{example});
  }
  return value->text;
}

std::string ObjectReader::text_or(std::string_view key, std::string_view otherwise) {
  const Value* value = maybe(key, Type::text);
  return value == nullptr ? std::string{otherwise} : value->text;
}

bool ObjectReader::within(std::string_view key, const Value& value, const Bounds& bounds) {
  const bool low_good = bounds.exclusive_low ? value.number > bounds.low : value.number >= bounds.low;
  if (low_good && value.number <= bounds.high) return true;
  problem_->report(value.place, quoted(key) + " is " + show(value) + "; it must be " +
                                    describe(bounds, value.number) + std::string{unit_of_key(key)});
  return false;
}

double ObjectReader::number(std::string_view key, const Bounds& bounds, std::string_view example) {
  const Value* value = required(key, Type::number, example);
  return value != nullptr && within(key, *value, bounds) ? value->number : 0.0;
}

double ObjectReader::number_or(std::string_view key, const Bounds& bounds, double otherwise) {
  return maybe_number(key, bounds).value_or(otherwise);
}

std::optional<double> ObjectReader::maybe_number(std::string_view key, const Bounds& bounds) {
  const Value* value = maybe(key, Type::number);
  if (value == nullptr || !within(key, *value, bounds)) return std::nullopt;
  return value->number;
}

int ObjectReader::integer_or(std::string_view key, int low, int high, int otherwise) {
  const Value* value = maybe(key, Type::number);
  if (value == nullptr) return otherwise;
  if (!within(key, *value, {static_cast<double>(low), static_cast<double>(high)})) return otherwise;
  if (value->number != std::floor(value->number)) {
    problem_->report(value->place, quoted(key) + " is " + show(*value) + "; it must be a whole number");
    return otherwise;
  }
  return static_cast<int>(value->number);
}

std::optional<bool> ObjectReader::maybe_flag(std::string_view key) {
  const Value* value = maybe(key, Type::boolean);
  return value == nullptr ? std::nullopt : std::optional{value->boolean};
}

bool ObjectReader::flag_or(std::string_view key, bool otherwise) {
  return maybe_flag(key).value_or(otherwise);
}

std::vector<std::string> ObjectReader::texts_or_empty(std::string_view key) {
  std::vector<std::string> texts;
  const Value* list = maybe(key, Type::list);
  if (list == nullptr) return texts;
  for (const Value& item : list->items) {
    if (item.type != Type::text) {
      problem_->report(item.place, quoted(key) + " is a list of texts in quotes; this is " + show(item));
      return texts;
    }
    texts.push_back(item.text);
  }
  return texts;
}

std::vector<double> ObjectReader::numbers_or_empty(std::string_view key, const Bounds& bounds) {
  std::vector<double> numbers;
  const Value* list = maybe(key, Type::list);
  if (list == nullptr) return numbers;
  for (const Value& item : list->items) {
    if (item.type != Type::number) {
      problem_->report(item.place, quoted(key) + " is a list of numbers; this is " + show(item));
      return numbers;
    }
    if (!within(key, item, bounds)) return numbers;
    numbers.push_back(item.number);
  }
  return numbers;
}

std::optional<std::size_t> ObjectReader::word_of(std::string_view key,
                                                 std::span<const std::string_view> words, bool may_miss) {
  const Value* value = find(key);
  if (value == nullptr && may_miss) return std::nullopt;
  if (value == nullptr) {
    problem_->report(value_->place,
                     std::string{form_->name} + " needs " + quoted(key) + ": " + join_words(words));
    return std::nullopt;
  }
  if (value->type == Type::text) {
    const auto at = std::find(words.begin(), words.end(), value->text);
    if (at != words.end()) return static_cast<std::size_t>(at - words.begin());
  }
  std::string reason = quoted(key) + " is " + show(*value) + "; it must be " + join_words(words);
  problem_->report(value->place, std::move(reason));
  return std::nullopt;
}

std::optional<std::string_view> nearest(std::string_view written,
                                        std::span<const std::string_view> candidates) {
  const std::size_t allowed = std::max<std::size_t>(2, written.size() / 3);
  std::optional<std::string_view> best;
  std::size_t best_distance = allowed + 1;
  for (const std::string_view candidate : candidates) {
    // A word that shares nothing is no misspelling, however short.
    const std::size_t d = distance(written, candidate);
    if (d < best_distance && d < std::max(written.size(), candidate.size())) {
      best = candidate;
      best_distance = d;
    }
  }
  return best;
}

std::string join_words(std::span<const std::string_view> words) {
  std::string out;
  for (std::size_t i = 0; i < words.size(); ++i) {
    if (i > 0) out += i + 1 == words.size() ? " or " : ", ";
    out += words[i];
  }
  return out;
}

std::string suggest(std::string_view written, std::span<const std::string_view> candidates) {
  if (const auto near = nearest(written, candidates)) return "; did you mean " + quoted(*near) + "?";
  if (candidates.empty()) return "; there are none";
  if (candidates.size() == 1) return "; the only one is " + quoted(candidates.front());
  constexpr std::size_t kShown = 24;
  std::string out = "; known are ";
  for (std::size_t i = 0; i < candidates.size() && i < kShown; ++i) {
    if (i > 0) out += ", ";
    out += quoted(candidates[i]);
  }
  return candidates.size() > kShown ? out + ", ..." : out;
}

}  // namespace loadstair::document
