#include "drivers/rehearsal/scpi_device.h"

#include <algorithm>
#include <cmath>

#include "analysis/base/number.h"
#include "drivers/rehearsal/simulator.h"

namespace loadstair::rehearsal {

namespace {

using Kind = ScpiAction::Kind;
constexpr std::size_t kErrorQueue = 20;

char upper(char c) {
  return c >= 'a' && c <= 'z' ? static_cast<char>(c - 'a' + 'A') : c;
}

bool same(std::string_view a, std::string_view b) {
  return std::equal(a.begin(), a.end(), b.begin(), b.end(),
                    [](char x, char y) { return upper(x) == upper(y); });
}

std::string_view trimmed(std::string_view text) {
  const std::size_t first = text.find_first_not_of(" \t\r\n");
  if (first == std::string_view::npos) return {};
  return text.substr(first, text.find_last_not_of(" \t\r\n") - first + 1);
}

std::optional<double> argument(std::string_view text, bool is_switch_knob) {
  if (is_switch_knob && same(text, "ON")) return 1.0;
  if (is_switch_knob && same(text, "OFF")) return 0.0;
  return base::parse_number(text);
}

}  // namespace

std::vector<std::string> units_of(std::string_view message) {
  std::vector<std::string> units;
  std::size_t from = 0;
  char quote = '\0';
  for (std::size_t i = 0; i <= message.size(); ++i) {
    const bool end = i == message.size();
    if (!end && quote != '\0') {
      if (message[i] == quote) quote = '\0';
      continue;
    }
    if (!end && (message[i] == '"' || message[i] == '\'')) {
      quote = message[i];
      continue;
    }
    if (!end && message[i] != ';') continue;
    const std::string_view unit = trimmed(message.substr(from, i - from));
    if (!unit.empty()) units.emplace_back(unit);
    from = i + 1;
  }
  return units;
}

bool is_query(std::string_view unit) {
  const std::size_t blank = unit.find_first_of(" \t");
  return unit.substr(0, blank).find('?') != std::string_view::npos;
}

void ScpiDevice::add_error(int number, std::string_view text) {
  std::string entry = base::print_integer(number) + ",\"" + std::string{text} + "\"";
  if (errors_.size() < kErrorQueue) {
    errors_.push_back(std::move(entry));
  } else {
    errors_.back() = "-350,\"Queue overflow\"";
  }
}

std::string ScpiDevice::next_error() {
  if (errors_.empty()) return "0,\"No error\"";
  std::string first = std::move(errors_.front());
  errors_.pop_front();
  return first;
}

std::optional<ScpiAction> ScpiDevice::common(std::string_view unit) {
  const auto is = [&](std::string_view word) { return same(unit, word); };
  if (is("*IDN?")) return ScpiAction{Kind::identity, 0, 0.0, {}};
  if (is("*OPC?")) return ScpiAction{Kind::complete, 0, 0.0, {}};
  if (is("*STB?") || is("*ESR?")) return ScpiAction{Kind::text, 0, 0.0, "0"};
  if (is("SYST:ERR?") || is("SYST:ERR:NEXT?") || is("SYSTEM:ERROR?") || is("SYSTEM:ERROR:NEXT?"))
    return ScpiAction{Kind::text, 0, 0.0, next_error()};
  if (is("*CLS")) {
    errors_.clear();
    return ScpiAction{};
  }
  if (is("*RST")) return ScpiAction{Kind::reset, 0, 0.0, {}};
  if (is("*TRG") && description_.scope) return ScpiAction{Kind::trigger, 0, 0.0, {}};
  if (is("*OPC") || is("*WAI") || is("SYST:REM") || is("SYST:LOC")) return ScpiAction{};
  if (!description_.function_query.empty() && is(description_.function_query))
    return ScpiAction{Kind::function, 0, 0.0, {}};
  return std::nullopt;
}

std::optional<ScpiAction> ScpiDevice::setting(std::string_view unit) {
  constexpr std::string_view kPlace = "{value}";
  for (std::size_t i = 0; i < description_.settings.size(); ++i) {
    const ScpiSetting& s = description_.settings[i];
    if (!s.query.empty() && same(unit, s.query)) return ScpiAction{Kind::position, i, 0.0, {}};
    const std::size_t at = s.command.find(kPlace);
    if (at == std::string::npos) continue;
    const std::string_view before = trimmed(std::string_view{s.command}.substr(0, at));
    const std::string_view after = trimmed(std::string_view{s.command}.substr(at + kPlace.size()));
    if (unit.size() <= before.size() + after.size() || !same(unit.substr(0, before.size()), before) ||
        !same(unit.substr(unit.size() - after.size()), after))
      continue;
    const std::string_view middle = unit.substr(before.size(), unit.size() - before.size() - after.size());
    if (!before.empty() && middle.find_first_of(" \t") != 0) continue;  // "VOLTAGE 3" is not "VOLT 3"
    const auto value = argument(trimmed(middle), is_switch(s.knob));
    if (!value) {
      add_error(-104, "Data type error");
      return ScpiAction{};
    }
    if (*value < s.low || *value > s.high) {
      add_error(-222, "Data out of range");
      return ScpiAction{};
    }
    return ScpiAction{Kind::turn, i, *value, {}};
  }
  return std::nullopt;
}

ScpiAction ScpiDevice::understand(std::string_view unit) {
  for (std::size_t i = 0; i < description_.queries.size(); ++i)
    if (same(unit, description_.queries[i].text)) return {Kind::measure, i, 0.0, {}};
  if (auto action = setting(unit)) return std::move(*action);
  if (auto action = common(unit)) return std::move(*action);
  add_error(-113, "Undefined header");
  return {};
}

}  // namespace loadstair::rehearsal
