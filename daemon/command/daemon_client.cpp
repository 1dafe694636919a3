#include "daemon/command/daemon_client.h"

#include "analysis/base/number.h"
#include "daemon/command/user_error.h"
#include "daemon/service/http_client.h"

namespace loadstair::command {
namespace {

base::Outcome<nlohmann::json> answered(const base::Outcome<service::HttpReply>& reply) {
  if (!reply) return reply.refusal();
  auto body = nlohmann::json::parse(reply->body, nullptr, false);
  if (reply->status != 200) {
    std::string why = "status " + base::print_integer(reply->status);
    if (body.is_object() && body.contains("error") && body["error"].is_string())
      why = body["error"].get<std::string>();
    return base::Refusal{"", why};
  }
  if (body.is_discarded()) return base::Refusal{"daemon", "its answer is not JSON"};
  return body;
}

}  // namespace

std::string program_version() {
  return LOADSTAIR_VERSION;
}

base::Outcome<nlohmann::json> DaemonClient::get(const std::string& path) const {
  service::HttpCall request;
  request.port = address_.port;
  request.target = "/api/v1/" + path;
  request.limit = std::chrono::seconds{60};
  return answered(service::call(request));
}

base::Outcome<nlohmann::json> DaemonClient::post(const std::string& path, const nlohmann::json& body) const {
  service::HttpCall request;
  request.port = address_.port;
  request.method = "POST";
  request.target = "/api/v1/" + path;
  request.token = address_.token;
  request.body = body.dump(-1, ' ', false, nlohmann::json::error_handler_t::replace);
  return answered(service::call(request));
}

std::optional<DaemonClient> running_daemon(const std::string& record) {
  const auto address = take(service::find_daemon(record));
  if (!address) return std::nullopt;
  if (address->version != program_version()) {
    throw UserError{"the running daemon is version " + address->version + ", this program is " +
                    program_version() +
                    "; use the daemon's program, or stop the daemon and start it with this one"};
  }
  return DaemonClient{*address};
}

}  // namespace loadstair::command
