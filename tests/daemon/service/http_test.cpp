#include <arpa/inet.h>
#include <sys/socket.h>
#include <unistd.h>

#include <boost/asio/io_context.hpp>
#include <boost/asio/post.hpp>
#include <catch2/catch.hpp>
#include <thread>

#include "daemon/service/http_client.h"
#include "daemon/service/http_server.h"

using namespace loadstair;
using service::HttpReply;
using service::HttpRequest;

namespace {

/// A server that echoes what reached its handler, on a thread of its own.
class Served {
 public:
  Served() {
    auto server = service::HttpServer::listen(io_.get_executor(), *clock_, 0,
                                              [](HttpRequest request) { return echo(std::move(request)); });
    REQUIRE(server);
    server_ = std::move(*server);
    server_->start(tasks_);
    thread_ = std::thread{[this] { io_.run(); }};
  }
  ~Served() {
    boost::asio::post(io_, [this] { tasks_.cancel(); });
    thread_.join();
  }
  [[nodiscard]] int port() const { return server_->port(); }

 private:
  static boost::asio::awaitable<HttpReply> echo(HttpRequest request) {
    co_return HttpReply{200,
                        request.method + " " + request.path + " ? " + request.query + " : " + request.body,
                        "text/plain"};
  }

  boost::asio::io_context io_{1};
  std::unique_ptr<link::Clock> clock_ = link::make_real_clock();
  link::TaskScope tasks_{io_.get_executor(), [](std::exception_ptr) {}};
  std::unique_ptr<service::HttpServer> server_;
  std::thread thread_;
};

/// Sends bytes as they are and returns everything that comes back until the peer closes.
std::string raw(int port, const std::string& bytes) {
  const int fd = socket(AF_INET, SOCK_STREAM, 0);
  sockaddr_in where{};
  where.sin_family = AF_INET;
  where.sin_port = htons(static_cast<std::uint16_t>(port));
  where.sin_addr.s_addr = htonl(INADDR_LOOPBACK);
  REQUIRE(connect(fd, reinterpret_cast<const sockaddr*>(&where), sizeof(where)) == 0);
  REQUIRE(send(fd, bytes.data(), bytes.size(), MSG_NOSIGNAL) == static_cast<ssize_t>(bytes.size()));
  std::string answer;
  char buffer[4096];
  for (ssize_t count = 0; (count = recv(fd, buffer, sizeof(buffer), 0)) > 0;)
    answer.append(buffer, static_cast<std::size_t>(count));
  close(fd);
  return answer;
}

std::string status_of(const std::string& answer) {
  return answer.substr(9, 3);
}

}  // namespace

TEST_CASE("a request reaches the handler and its reply comes back") {
  const Served served;
  const auto reply =
      service::call({.port = served.port(), .method = "POST", .target = "/api/v1/runs?x=1", .body = "{}"});
  REQUIRE(reply);
  CHECK(reply->status == 200);
  CHECK(reply->body == "POST /api/v1/runs ? x=1 : {}");
}

// RFC 9110 status codes; DNS rebinding and cross-site requests are what the checks are for.
TEST_CASE("requests under another name or from another site never reach the handler") {
  const Served served;
  const std::string ours = "127.0.0.1:" + std::to_string(served.port());
  const std::string end = "Connection: close\r\n\r\n";
  CHECK(status_of(raw(served.port(), "GET /x HTTP/1.1\r\nHost: " + ours + "\r\n" + end)) == "200");
  CHECK(status_of(raw(served.port(), "GET /x HTTP/1.1\r\nHost: bench.example\r\n" + end)) == "403");
  CHECK(status_of(raw(served.port(), "GET /x HTTP/1.1\r\n" + end)) == "403");
  CHECK(status_of(raw(served.port(), "GET /x HTTP/1.1\r\nHost: " + ours +
                                         "\r\nOrigin: http://elsewhere.example\r\n" + end)) == "403");
  CHECK(status_of(raw(served.port(), "GET /x HTTP/1.1\r\nHost: " + ours + "\r\nOrigin: http://" + ours +
                                         "\r\n" + end)) == "200");
  CHECK(status_of(raw(served.port(), "POST /x HTTP/1.1\r\nHost: " + ours +
                                         "\r\nContent-Type: text/plain\r\nContent-Length: 2\r\n" + end +
                                         "{}")) == "415");
  CHECK(status_of(raw(served.port(),
                      "PUT /x HTTP/1.1\r\nHost: " + ours + "\r\nContent-Length: 0\r\n" + end)) == "405");
}

TEST_CASE("a body beyond the bound is refused") {
  const Served served;
  const std::string ours = "127.0.0.1:" + std::to_string(served.port());
  CHECK(status_of(raw(served.port(),
                      "POST /x HTTP/1.1\r\nHost: " + ours +
                          "\r\nContent-Type: application/json\r\nContent-Length: 5000000\r\n\r\n")) == "413");
}

TEST_CASE("garbage closes the connection and the server goes on") {
  const Served served;
  CHECK(raw(served.port(), "\x16\x03\x01 nonsense\r\n\r\n").empty());
  CHECK(service::call({.port = served.port(), .target = "/y"}));
}

TEST_CASE("nobody listening is a refusal that says so") {
  const auto reply = service::call({.port = 1, .target = "/"});
  REQUIRE_FALSE(reply);
  CHECK(reply.refusal().reason.find("did not answer") != std::string::npos);
}
