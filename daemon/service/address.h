// Where a running daemon is found: a small file per record in the user's runtime directory, readable by the
// user only.
#pragma once

#include <optional>
#include <string>
#include <vector>

#include "analysis/base/outcome.h"

namespace loadstair::service {

struct Address {
  int port = 0;
  std::string token;    ///< 64 hexadecimal digits
  std::string record;   ///< absolute path of the record it owns
  std::string version;  ///< of the program
  int process = 0;      ///< process id
};

/// A fresh random token.
[[nodiscard]] std::string make_token();

/// $LOADSTAIR_RUNTIME, else $XDG_RUNTIME_DIR/loadstair, else a folder of the user's own under /tmp; made with
/// mode 0700.
[[nodiscard]] base::Outcome<std::string> runtime_folder();

/// Writes the file (mode 0600, whole or not at all); removed again by `withdraw`.
[[nodiscard]] base::Outcome<void> publish(const Address& address);
void withdraw(const Address& address);

/// Addresses of daemons that still live; files left behind by dead ones are passed over.
[[nodiscard]] std::vector<Address> living_daemons();

/// The daemon that owns `record`; with an empty `record` the only one that lives.
/// nullopt: none. Refusal: several live and none was named; the text lists their records.
[[nodiscard]] base::Outcome<std::optional<Address>> find_daemon(const std::string& record);

}  // namespace loadstair::service
