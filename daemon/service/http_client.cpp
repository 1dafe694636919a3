#include "daemon/service/http_client.h"

#include <boost/asio/io_context.hpp>
#include <boost/asio/ip/tcp.hpp>
#include <boost/beast/core/flat_buffer.hpp>
#include <boost/beast/core/tcp_stream.hpp>
#include <boost/beast/http.hpp>

#include "analysis/base/number.h"

namespace loadstair::service {
namespace {

namespace asio = boost::asio;
namespace beast = boost::beast;
namespace http = beast::http;
using boost::system::error_code;

/// Connect, write and read in turn, each handler starting the next; the stream's own limit covers all three.
struct Conversation {
  asio::io_context io;
  beast::tcp_stream stream{io};
  beast::flat_buffer buffer;
  http::request<http::string_body> request;
  http::response_parser<http::string_body> parser;
  error_code failure;

  void run(const asio::ip::tcp::endpoint& where, std::chrono::milliseconds limit) {
    parser.body_limit(std::uint64_t{1} << 30U);
    stream.expires_after(limit);
    stream.async_connect(where, [this](error_code error) {
      failure = error;
      if (!error) write();
    });
    io.run();
  }

  void write() {
    http::async_write(stream, request, [this](error_code error, std::size_t) {
      failure = error;
      if (!error) read();
    });
  }

  void read() {
    http::async_read(stream, buffer, parser, [this](error_code error, std::size_t) { failure = error; });
  }
};

}  // namespace

base::Outcome<HttpReply> call(const HttpCall& request) {
  const std::string host = "127.0.0.1:" + base::print_integer(request.port);
  Conversation conversation;
  auto& message = conversation.request;
  message.method(request.method == "POST" ? http::verb::post : http::verb::get);
  message.target(request.target);
  message.version(11);
  message.set(http::field::host, host);
  message.set(http::field::connection, "close");
  if (!request.token.empty()) message.set(http::field::authorization, "Bearer " + request.token);
  if (request.method == "POST") {
    message.set(http::field::content_type, "application/json");
    message.body() = request.body;
  }
  message.prepare_payload();
  conversation.run({asio::ip::address_v4::loopback(), static_cast<std::uint16_t>(request.port)},
                   request.limit);
  if (conversation.failure) {
    return base::Refusal{
        host, "the daemon did not answer (" + conversation.failure.message() + "); is it still running?"};
  }
  const auto& response = conversation.parser.get();
  return HttpReply{
      static_cast<int>(response.result_int()), response.body(),
      std::string{response[http::field::content_type].data(), response[http::field::content_type].size()}};
}

}  // namespace loadstair::service
