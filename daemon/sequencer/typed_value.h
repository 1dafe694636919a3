// What a person typed, as numbers.
#pragma once

#include <string>

#include "analysis/base/outcome.h"
#include "daemon/sequencer/sequencer.h"
#include "daemon/setup/hookup.h"

namespace loadstair::sequencer {

/// A typed value in the unit that the channel's meter shows, reduced to its base ("mV" to V).
struct TypedValue {
  double value = 0.0;
  std::string unit;
  double range = 0.0;       ///< full scale; 0: not given
  double last_digit = 0.0;  ///< weight; > 0
  std::string text;         ///< as typed, for the record
};

/// The unit a channel's meter shows, before conversion: V across a shunt or of a thermocouple with its own
/// cold junction channel, ohm of a resistance thermometer, the channel's own unit otherwise.
[[nodiscard]] std::string meter_unit(const setup::Channel& channel);

/// Reads an entry. Number with point or comma, with or without its unit; unit and range as given.
/// Refusal (place: the channel's name): not one number, both marks in one number, an unknown unit or one of
/// another kind, a range or last digit that is not a positive number, a magnitude of 1e12 and more.
[[nodiscard]] base::Outcome<TypedValue> read_typed(const setup::Channel& channel, const TypedEntry& entry);

/// Why a value is unlikely enough to be asked for again; empty: plausible.
/// converted   in the channel's unit
/// earlier     this channel's value of the other round of the same step, in the meter's unit
[[nodiscard]] std::string why_implausible(const setup::Channel& channel, const TypedValue& typed,
                                          double converted, std::optional<double> earlier);

}  // namespace loadstair::sequencer
