#include "drivers/rehearsal/faults.h"

#include <array>

#include "analysis/base/number.h"

namespace loadstair::rehearsal {

namespace {

struct KindName {
  FaultKind kind;
  std::string_view name;
};
constexpr std::array<KindName, 10> kKinds = {{{FaultKind::silence, "silence"},
                                              {FaultKind::late, "late"},
                                              {FaultKind::garbage, "garbage"},
                                              {FaultKind::truncated, "truncated"},
                                              {FaultKind::duplicate, "duplicate"},
                                              {FaultKind::stale, "stale"},
                                              {FaultKind::overload, "overload"},
                                              {FaultKind::unit_change, "unit_change"},
                                              {FaultKind::wrong_identity, "wrong_identity"},
                                              {FaultKind::vanish, "vanish"}}};

bool covers(const Fault& fault, double time_s, std::int64_t query) {
  if (fault.at_query) return query >= *fault.at_query && query < *fault.at_query + fault.count;
  return fault.at_s && time_s >= *fault.at_s && time_s < *fault.at_s + fault.length_s;
}

std::vector<std::string_view> words_of(std::string_view line) {
  constexpr std::string_view kBlanks = " \t\r";
  std::vector<std::string_view> words;
  std::size_t at = line.find_first_not_of(kBlanks);
  while (at != std::string_view::npos) {
    const std::size_t end = line.find_first_of(kBlanks, at);
    words.push_back(line.substr(at, end - at));
    at = line.find_first_not_of(kBlanks, end);
  }
  return words;
}

/// Takes `key=value`; a reason when it is not one.
std::optional<std::string> take_option(Fault& fault, std::string_view word) {
  const std::size_t equals = word.find('=');
  const std::string_view key = word.substr(0, equals);
  const auto value =
      equals == std::string_view::npos ? std::nullopt : base::parse_number(word.substr(equals + 1));
  if (!value || *value < 0.0)
    return "\"" + std::string{word} + "\" is not KEY=NUMBER with a number of zero or more";
  if (key == "at") {
    fault.at_s = *value;
  } else if (key == "length") {
    fault.length_s = *value;
  } else if (key == "delay") {
    fault.delay_s = *value;
  } else if (key == "query" || key == "count") {
    const auto whole = base::parse_integer(word.substr(equals + 1));
    if (!whole || *whole < 1) return "\"" + std::string{word} + "\": a whole number from 1 on is wanted";
    if (key == "query") fault.at_query = *whole;
    if (key == "count") fault.count = *whole;
  } else {
    return "\"" + std::string{key} + "\" is not known; at, length, query, count or delay";
  }
  return std::nullopt;
}

base::Outcome<Fault> parse_fault(std::string_view line, const std::string& place) {
  const auto words = words_of(line);
  if (words.size() < 3)
    return base::Refusal{place, "INSTRUMENT KIND and at=SECONDS or query=NUMBER are wanted"};
  // Instrument names may hold blanks: the kind is the last word before the first option.
  std::size_t kind = 1;
  while (kind + 1 < words.size() && words[kind + 1].find('=') == std::string_view::npos) ++kind;
  Fault fault;
  for (std::size_t i = 0; i < kind; ++i) {
    if (i > 0) fault.instrument += ' ';
    fault.instrument += words[i];
  }
  bool known = false;
  for (const KindName& entry : kKinds) {
    if (entry.name != words[kind]) continue;
    fault.kind = entry.kind;
    known = true;
  }
  if (!known) {
    std::string names;
    for (const KindName& entry : kKinds) names += (names.empty() ? "" : ", ") + std::string{entry.name};
    return base::Refusal{place, "\"" + std::string{words[kind]} + "\" is no kind of fault; " + names};
  }
  for (std::size_t i = kind + 1; i < words.size(); ++i)
    if (const auto reason = take_option(fault, words[i])) return base::Refusal{place, *reason};
  if (fault.at_s.has_value() == fault.at_query.has_value())
    return base::Refusal{place, "one of at=SECONDS and query=NUMBER is wanted, not both"};
  return fault;
}

}  // namespace

std::string_view name_of(FaultKind kind) {
  for (const KindName& entry : kKinds)
    if (entry.kind == kind) return entry.name;
  return "unknown";
}

base::Outcome<std::vector<Fault>> parse_faults(std::string_view text) {
  std::vector<Fault> faults;
  std::int64_t number = 0;
  while (!text.empty()) {
    const std::size_t end = std::min(text.find('\n'), text.size());
    const std::string_view line = text.substr(0, end);
    text.remove_prefix(std::min(end + 1, text.size()));
    ++number;
    const auto words = words_of(line);
    if (words.empty() || words.front().front() == '#') continue;
    auto fault = parse_fault(line, "line " + base::print_integer(number));
    if (!fault) return fault.refusal();
    faults.push_back(std::move(fault.value()));
  }
  return faults;
}

const Fault* FaultPlan::covering(FaultKind kind, double time_s, std::int64_t query) const {
  for (const Fault& fault : faults_)
    if (fault.kind == kind && covers(fault, time_s, query)) return &fault;
  return nullptr;
}

const Fault* FaultPlan::altering(double time_s, std::int64_t query) const {
  for (const Fault& fault : faults_)
    if (fault.kind != FaultKind::vanish && fault.kind != FaultKind::wrong_identity &&
        covers(fault, time_s, query))
      return &fault;
  return nullptr;
}

}  // namespace loadstair::rehearsal
