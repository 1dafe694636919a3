// SCPI and IEEE 488.2 messages: what a reply holds, and how a number is put into a command.
#pragma once

#include <span>
#include <string>
#include <string_view>
#include <vector>

#include "analysis/base/outcome.h"
#include "drivers/dialect/field.h"

namespace loadstair::dialect {

/// Splits a reply into its data elements: commas divide those of one query, semicolons those of several (IEEE
/// 488.2-1992, 8.3 and 8.4); neither divides inside quotes. Blanks around an element are removed. A reply of
/// blanks alone has no element; a quote that does not end reaches to the end of the reply.
[[nodiscard]] std::vector<std::string_view> split_reply(std::string_view reply);

/// Reads a reply that should hold one number per entry of `units` (as in read_field).
/// Returns: as many fields as `units`. With another number of elements than that, all are invalid: which is
/// which cannot be told.
[[nodiscard]] std::vector<Field> read_reply(std::string_view reply, std::span<const std::string> units,
                                            const NumberRules& rules);

/// A quoted string (single or double quotes, doubled inside; IEEE 488.2-1992, 8.7.8) without its quotes.
[[nodiscard]] base::Outcome<std::string> read_string(std::string_view element);

/// The reply to *IDN? (IEEE 488.2-1992, 10.14).
struct Identity {
  std::string manufacturer;
  std::string model;
  std::string serial_number;  ///< empty where the instrument says 0: not known
  std::string firmware;       ///< the same

  bool operator==(const Identity&) const = default;
};

/// Refusals: not exactly four elements, or bytes outside printable ASCII.
[[nodiscard]] base::Outcome<Identity> read_identity(std::string_view reply);

/// A number in plain decimal notation where at most nine places show it exactly, else with an exponent; reads
/// back to the same number.
[[nodiscard]] std::string write_number(double value);

/// Puts a number into a command: "POW {value}" and 385.1 give "POW 385.1". A switch takes 0 or 1. Refusals: a
/// number that is not finite.
[[nodiscard]] base::Outcome<std::string> write_command(std::string_view command, double value);

}  // namespace loadstair::dialect
