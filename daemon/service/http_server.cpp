#include "daemon/service/http_server.h"

#include <boost/asio/as_tuple.hpp>
#include <boost/asio/ip/tcp.hpp>
#include <boost/asio/use_awaitable.hpp>
#include <boost/beast/core/flat_buffer.hpp>
#include <boost/beast/core/tcp_stream.hpp>
#include <boost/beast/http.hpp>
#include <chrono>
#include <optional>
#include <utility>

#include "analysis/base/number.h"

namespace loadstair::service {
namespace {

namespace asio = boost::asio;
namespace beast = boost::beast;
namespace http = beast::http;
using tcp = asio::ip::tcp;

constexpr std::uint64_t kBodyLimit = 4U << 20U;
constexpr std::chrono::seconds kIdleLimit{60};
constexpr auto kQuiet = asio::as_tuple(asio::use_awaitable);

using Request = http::request<http::string_body>;
using Response = http::response<http::string_body>;

std::string text_of(beast::string_view view) {
  return {view.data(), view.size()};
}

std::string refusal_body(const std::string& why) {
  std::string quoted;
  for (const char letter : why) {
    if (letter == '"' || letter == '\\') quoted += '\\';
    quoted += letter;
  }
  return "{\"error\": \"" + quoted + "\"}\n";
}

Response render(const HttpReply& reply, unsigned version, bool keep_alive) {
  Response response{static_cast<http::status>(reply.status), version};
  response.set(http::field::content_type, reply.content_type);
  response.set(http::field::cache_control, "no-store");
  response.set("X-Content-Type-Options", "nosniff");
  response.set("Content-Security-Policy", "default-src 'none'");
  response.keep_alive(keep_alive);
  response.body() = reply.body;
  response.prepare_payload();
  return response;
}

class Server : public HttpServer {
 public:
  Server(tcp::acceptor acceptor, link::Clock& clock, HttpHandler handler)
      : acceptor_{std::move(acceptor)}, clock_{clock}, handler_{std::move(handler)} {}

  [[nodiscard]] int port() const override { return acceptor_.local_endpoint().port(); }

  void start(link::TaskScope& scope) override { scope.spawn(accept_all(scope)); }

 private:
  asio::awaitable<void> accept_all(link::TaskScope& scope) {
    for (;;) {
      auto [error, socket] = co_await acceptor_.async_accept(kQuiet);
      if (error == asio::error::operation_aborted) co_return;
      if (error) {
        // Out of descriptors, most likely: look again a little later instead of spinning.
        co_await clock_.sleep_for(std::chrono::milliseconds{100});
        continue;
      }
      scope.spawn(converse(std::move(socket)));
    }
  }

  asio::awaitable<void> converse(tcp::socket socket) {
    beast::tcp_stream stream{std::move(socket)};
    beast::flat_buffer buffer;
    for (;;) {
      http::request_parser<http::string_body> parser;
      parser.body_limit(kBodyLimit);
      stream.expires_after(kIdleLimit);
      auto [error, count] = co_await http::async_read(stream, buffer, parser, kQuiet);
      if (error == http::error::body_limit) {
        // Not built inside the co_await: g++ 12 destroys such an aggregate twice.
        const HttpReply too_large{413, refusal_body("the body is larger than 4 MiB")};
        co_await send(stream, too_large, 11, false);
        break;
      }
      if (error) break;
      const Request request = parser.release();
      HttpReply reply;
      if (auto refused = refuse(request)) {
        reply = *refused;
      } else {
        reply = co_await handler_(plain(request));
      }
      if (!co_await send(stream, reply, request.version(), request.keep_alive()) || !request.keep_alive())
        break;
    }
    boost::system::error_code ignored;
    stream.socket().shutdown(tcp::socket::shutdown_send, ignored);
  }

  asio::awaitable<bool> send(beast::tcp_stream& stream, HttpReply reply, unsigned version, bool keep_alive) {
    const Response response = render(reply, version, keep_alive);
    stream.expires_after(kIdleLimit);
    auto [error, count] = co_await http::async_write(stream, response, kQuiet);
    co_return !error;
  }

  /// What a page of another site, or a name that was bent to our address, may not do.
  [[nodiscard]] std::optional<HttpReply> refuse(const Request& request) const {
    const std::string ours = ":" + base::print_integer(port());
    const std::string host = text_of(request[http::field::host]);
    if (host != "127.0.0.1" + ours && host != "localhost" + ours) {
      return HttpReply{403, refusal_body("this address answers as 127.0.0.1 or localhost only")};
    }
    const std::string origin = text_of(request[http::field::origin]);
    if (!origin.empty() && origin != "http://" + host) {
      return HttpReply{403, refusal_body("requests from another site are refused")};
    }
    const auto type = text_of(request[http::field::content_type]);
    if (request.method() == http::verb::post && !type.starts_with("application/json")) {
      return HttpReply{415, refusal_body("send application/json")};
    }
    if (request.method() != http::verb::get && request.method() != http::verb::post) {
      return HttpReply{405, refusal_body("GET and POST only")};
    }
    return std::nullopt;
  }

  static HttpRequest plain(const Request& request) {
    const std::string target = text_of(request.target());
    const auto mark = target.find('?');
    HttpRequest result;
    result.method = text_of(request.method_string());
    result.path = target.substr(0, mark);
    if (mark != std::string::npos) result.query = target.substr(mark + 1);
    result.body = request.body();
    result.authorization = text_of(request[http::field::authorization]);
    return result;
  }

  tcp::acceptor acceptor_;
  link::Clock& clock_;
  HttpHandler handler_;
};

}  // namespace

base::Outcome<std::unique_ptr<HttpServer>> HttpServer::listen(asio::any_io_executor executor,
                                                              link::Clock& clock, int port,
                                                              HttpHandler handler) {
  tcp::acceptor acceptor{executor};
  const tcp::endpoint where{asio::ip::address_v4::loopback(), static_cast<std::uint16_t>(port)};
  boost::system::error_code error;
  acceptor.open(where.protocol(), error);
  if (!error) acceptor.set_option(tcp::acceptor::reuse_address(true), error);
  if (!error) acceptor.bind(where, error);
  if (!error) acceptor.listen(asio::socket_base::max_listen_connections, error);
  if (error) {
    return base::Refusal{"127.0.0.1:" + base::print_integer(port),
                         "cannot listen there (" + error.message() + "); choose another port with --port"};
  }
  return std::unique_ptr<HttpServer>{new Server{std::move(acceptor), clock, std::move(handler)}};
}

}  // namespace loadstair::service
