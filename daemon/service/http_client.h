// One HTTP request to the daemon and its reply, blocking: what a command needs.
#pragma once

#include <chrono>
#include <string>

#include "analysis/base/outcome.h"
#include "daemon/service/http_server.h"

namespace loadstair::service {

struct HttpCall {
  int port = 0;  ///< on the loopback address
  std::string method = "GET";
  std::string target;  ///< path and query
  std::string body;    ///< JSON, for POST
  std::string token;   ///< sent as a bearer token
  std::chrono::milliseconds limit{5000};
};

/// Refusal: nobody listens, no reply within the limit, or the reply is not HTTP.
[[nodiscard]] base::Outcome<HttpReply> call(const HttpCall& request);

}  // namespace loadstair::service
