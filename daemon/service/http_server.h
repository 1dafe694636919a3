// service: what the daemon offers over HTTP to the commands and, later, to the page. It translates; it never
// computes a result and never touches an instrument except through the sequencer.
// This header: a small HTTP/1.1 server whose requests and replies are plain values.
#pragma once

#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <cstdint>
#include <functional>
#include <memory>
#include <string>

#include "analysis/base/outcome.h"
#include "drivers/link/clock.h"
#include "drivers/link/task_scope.h"

namespace loadstair::service {

struct HttpRequest {
  std::string method;         ///< "GET", "POST"
  std::string path;           ///< without the query
  std::string query;          ///< after '?', undecoded
  std::string body;           ///< at most 4 MiB; longer is answered with 413 before it gets here
  std::string authorization;  ///< the header's value
};

struct HttpReply {
  int status = 200;
  std::string body;
  std::string content_type = "application/json";
};

using HttpHandler = std::function<boost::asio::awaitable<HttpReply>(HttpRequest)>;

/// Listens on the loopback address. Requests whose Host is not the loopback name with our port, or whose
/// Origin is another site, are refused with 403 before the handler sees them; so are POSTs that are not
/// application/json, which a foreign page could send without asking.
class HttpServer {
 public:
  /// The clock outlives the server. `port` 0: any free one. Refusal: the port is taken.
  static base::Outcome<std::unique_ptr<HttpServer>> listen(boost::asio::any_io_executor executor,
                                                           link::Clock& clock, int port, HttpHandler handler);
  virtual ~HttpServer() = default;

  [[nodiscard]] virtual int port() const = 0;
  /// Serves until the scope is cancelled. Connections are tasks of `scope`.
  virtual void start(link::TaskScope& scope) = 0;
};

}  // namespace loadstair::service
