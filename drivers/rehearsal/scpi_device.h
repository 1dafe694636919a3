// The wits of a rehearsed SCPI instrument: from one program message unit to what has to happen. Text only.
// Not for when the answer is sent, nor for faults.
#pragma once

#include <deque>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "drivers/rehearsal/bench.h"

namespace loadstair::rehearsal {

/// What an instrument has to do for one command or query.
struct ScpiAction {
  enum class Kind {
    nothing,   ///< done, or refused into the error queue; no reply
    text,      ///< reply with `text`
    identity,  ///< reply with the identity
    measure,   ///< reply with the functions of queries[index]
    turn,      ///< turn the knob of settings[index] to `value`
    position,  ///< reply with the knob of settings[index]
    trigger,   ///< start a capture
    complete,  ///< reply 1 when the capture in progress is done
    function,  ///< reply with the function that the meter stands on
    reset,     ///< every switch of this instrument off
  };
  Kind kind = Kind::nothing;
  std::size_t index = 0;
  double value = 0.0;
  std::string text;
};

class ScpiDevice {
 public:
  explicit ScpiDevice(const InstrumentDescription& description) : description_{description} {}

  /// `unit`: one command or query, without ';' and terminator.
  [[nodiscard]] ScpiAction understand(std::string_view unit);
  /// SCPI-1999 21.8: negative numbers and texts of the standard.
  void add_error(int number, std::string_view text);

 private:
  [[nodiscard]] std::optional<ScpiAction> common(std::string_view unit);
  [[nodiscard]] std::optional<ScpiAction> setting(std::string_view unit);
  [[nodiscard]] std::string next_error();

  const InstrumentDescription& description_;
  std::deque<std::string> errors_;
};

/// Splits a program message at ';' outside quotes and trims the parts; empty parts are dropped.
[[nodiscard]] std::vector<std::string> units_of(std::string_view message);
/// True when the unit is a query, "MEAS:VOLT? (@1)" included.
[[nodiscard]] bool is_query(std::string_view unit);

}  // namespace loadstair::rehearsal
