// The daemon's interface as the commands use it.
#pragma once

#include <nlohmann/json.hpp>
#include <optional>
#include <string>

#include "analysis/base/outcome.h"
#include "daemon/service/address.h"

namespace loadstair::command {

/// The program's version, which a command and the daemon it talks to must share.
[[nodiscard]] std::string program_version();

/// Talks to one daemon.
class DaemonClient {
 public:
  explicit DaemonClient(service::Address address) : address_{std::move(address)} {}

  /// Refusals: no answer, or the daemon's own refusal in its words.
  [[nodiscard]] base::Outcome<nlohmann::json> get(const std::string& path) const;
  [[nodiscard]] base::Outcome<nlohmann::json> post(const std::string& path, const nlohmann::json& body) const;
  [[nodiscard]] const service::Address& address() const { return address_; }

 private:
  service::Address address_;
};

/// The daemon for `record` (empty: the only one there is). nullopt when none is running.
/// Throws UserError when several live and none is named, or when it is another version than this program.
[[nodiscard]] std::optional<DaemonClient> running_daemon(const std::string& record);

}  // namespace loadstair::command
