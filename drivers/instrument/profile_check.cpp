#include "drivers/instrument/profile_check.h"

#include <algorithm>
#include <cmath>
#include <set>
#include <string>

#include "analysis/base/number.h"
#include "drivers/dialect/text_line.h"

namespace loadstair::instrument {
namespace {

using base::Outcome;
using base::Refusal;

std::string path(const char* list, std::size_t index, const char* member = "") {
  return list + ("[" + base::print_integer(static_cast<std::int64_t>(index)) + "]") + member;
}

/// Bytes that would end a message early or that no instrument should be sent.
bool is_clean(const std::string& text) {
  return std::none_of(text.begin(), text.end(), [](char c) { return c == '\n' || c == '\r' || c == '\0'; });
}

Outcome<void> check_values(const Profile& profile) {
  std::set<std::string> names;
  for (std::size_t i = 0; i < profile.values.size(); ++i) {
    const auto& value = profile.values[i];
    if (value.name.empty()) return Refusal{path("values", i, ".name"), "a value needs a name"};
    if (!names.insert(value.name).second) {
      return Refusal{path("values", i, ".name"), "there are two values named \"" + value.name + "\""};
    }
    if (profile.dialect == Dialect::scpi) continue;
    if (const auto pattern = dialect::LinePattern::parse(value.line_pattern); !pattern) {
      return Refusal{path("values", i, ".line_pattern"), pattern.refusal().text()};
    }
  }
  for (std::size_t i = 0; i < profile.queries.size(); ++i) {
    const auto& query = profile.queries[i];
    if (query.text.empty() || !is_clean(query.text)) {
      return Refusal{path("queries", i, ".text"), "a query is one line of text"};
    }
    if (query.values.empty())
      return Refusal{path("queries", i, ".values"), "a query needs the values in its reply"};
    for (std::size_t j = 0; j < query.values.size(); ++j) {
      if (!query.values[j].empty() && !names.contains(query.values[j])) {
        return Refusal{path("queries", i, ".") + path("values", j),
                       "there is no value named \"" + query.values[j] + "\""};
      }
    }
  }
  return {};
}

Outcome<void> check_commands(const Profile& profile) {
  for (std::size_t i = 0; i < profile.settings.size(); ++i) {
    const auto& setting = profile.settings[i];
    if (setting.name.empty()) return Refusal{path("settings", i, ".name"), "a setting needs a name"};
    if (!is_clean(setting.command) || setting.command.find("{value}") == std::string::npos) {
      return Refusal{path("settings", i, ".command"), "a setting's command is one line with {value} in it"};
    }
    if (!is_clean(setting.readback))
      return Refusal{path("settings", i, ".readback"), "a query is one line of text"};
    if (!(setting.tolerance >= 0.0))
      return Refusal{path("settings", i, ".tolerance"), "a tolerance is 0 or more"};
  }
  const auto all_clean = [](const std::vector<std::string>& commands) {
    return std::all_of(commands.begin(), commands.end(),
                       [](const std::string& command) { return !command.empty() && is_clean(command); });
  };
  if (!all_clean(profile.start_commands)) return Refusal{"start_commands", "each is one line of text"};
  if (!all_clean(profile.on_commands)) return Refusal{"on_commands", "each is one line of text"};
  if (!profile.safe) return {};
  if (profile.safe->commands.empty() || !all_clean(profile.safe->commands)) {
    return Refusal{"safe.commands", "at least one command, each one line of text"};
  }
  if (!is_clean(profile.safe->confirm_query))
    return Refusal{"safe.confirm_query", "a query is one line of text"};
  if (!profile.safe->confirm_query.empty() && profile.safe->confirm_reply.empty()) {
    return Refusal{"safe.confirm_reply", "say what the instrument answers when it is safe"};
  }
  return {};
}

}  // namespace

Outcome<void> check_profile(const Profile& profile) {
  if (profile.terminator.empty()) return Refusal{"terminator", "lines need an end, usually \"\\n\""};
  if (!std::isfinite(profile.timeout_s) || profile.timeout_s <= 0.0) {
    return Refusal{"timeout_s", "a timeout is more than 0 s"};
  }
  if (profile.dialect == Dialect::scpi &&
      (profile.identity_query.empty() || !is_clean(profile.identity_query))) {
    return Refusal{"identity_query",
                   "without it a late reply cannot be told from the next one; usually \"*IDN?\""};
  }
  if (!is_clean(profile.function_query) || profile.function_query.empty() != profile.function_reply.empty()) {
    return Refusal{"function_query", "one line of text, together with \"function_reply\""};
  }
  if (profile.dialect == Dialect::text_lines) {
    if (profile.values.empty()) return Refusal{"values", "lines need at least one value with a pattern"};
    if (!profile.settings.empty() || profile.safe || !profile.on_commands.empty() ||
        !profile.queries.empty() || !profile.function_query.empty()) {
      return Refusal{"dialect", "what prints text lines unasked is neither asked nor commanded"};
    }
  }
  if (auto values = check_values(profile); !values) return values;
  return check_commands(profile);
}

}  // namespace loadstair::instrument
