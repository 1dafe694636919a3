#include "daemon/service/api.h"

#include <sodium.h>

#include <algorithm>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/use_awaitable.hpp>
#include <memory>
#include <nlohmann/json.hpp>
#include <optional>
#include <utility>

#include "analysis/base/number.h"
#include "daemon/service/compare_json.h"
#include "daemon/service/result_json.h"
#include "daemon/service/state_json.h"
#include "daemon/setup/stair.h"

namespace loadstair::service {
namespace {

namespace asio = boost::asio;
using nlohmann::json;

constexpr std::string_view kRoot = "/api/v1/";

/// Texts come from files and instruments: bytes that are not UTF-8 are replaced, never thrown about.
std::string text_of(const json& value) {
  return value.dump(-1, ' ', false, json::error_handler_t::replace) + "\n";
}

HttpReply good(const json& value) {
  return {200, text_of(value)};
}
HttpReply refused(int status, const std::string& why) {
  return {status, text_of({{"error", why}})};
}

HttpReply done_or_refused(const base::Outcome<void>& outcome) {
  return outcome ? good(json::object()) : refused(409, outcome.refusal().text());
}

bool same_secret(const std::string& a, const std::string& b) {
  return a.size() == b.size() && sodium_memcmp(a.data(), b.data(), a.size()) == 0;
}

/// The members of a request body, with a type each.
class Members {
 public:
  explicit Members(json body) : body_(std::move(body)) {}  // in braces it would become a list

  [[nodiscard]] std::string text(const char* name, std::string otherwise = {}) const {
    const auto found = body_.find(name);
    return found != body_.end() && found->is_string() ? found->get<std::string>() : std::move(otherwise);
  }
  [[nodiscard]] std::optional<std::int64_t> whole(const char* name) const {
    const auto found = body_.find(name);
    if (found == body_.end() || !found->is_number_integer()) return std::nullopt;
    return found->get<std::int64_t>();
  }
  [[nodiscard]] bool flag(const char* name) const {
    const auto found = body_.find(name);
    return found != body_.end() && found->is_boolean() && found->get<bool>();
  }

 private:
  json body_;
};

class Api {
 public:
  explicit Api(ApiParts parts) : parts_{std::move(parts)} {}

  asio::awaitable<HttpReply> answer(HttpRequest request) {
    if (!request.path.starts_with(kRoot))
      co_return refused(404, "nothing is here; the interface begins at /api/v1/");
    const std::string path = request.path.substr(kRoot.size());
    if (request.method == "GET") co_return co_await read(path);
    if (!same_secret(request.authorization, "Bearer " + parts_.token)) {
      co_return refused(401, "this changes something and needs the daemon's token");
    }
    json body = json::parse(request.body.empty() ? "{}" : request.body, nullptr, false);
    if (!body.is_object()) co_return refused(400, "the body is not a JSON object");
    co_return change(path, Members(std::move(body)));
  }

 private:
  asio::awaitable<HttpReply> read(std::string path) {
    if (path == "state") co_return good(state());
    // Named: g++ 12 destroys a closure that is built inside a co_await expression twice.
    if (path == "runs") {
      const auto list = [this] { return list_runs(); };
      co_return co_await on_pool(list);
    }
    if (path.starts_with("runs/")) {
      const auto run = base::parse_integer(path.substr(5));
      if (!run) co_return refused(404, "a run has a number: /api/v1/runs/1");
      const auto evaluate = [this, run = *run] { return results(run); };
      co_return co_await on_pool(evaluate);
    }
    if (path.starts_with("compare/")) {
      const std::string runs = path.substr(8);
      const std::size_t slash = std::min(runs.find('/'), runs.size());
      const auto reference = base::parse_integer(runs.substr(0, slash));
      const auto other = base::parse_integer(slash < runs.size() ? runs.substr(slash + 1) : std::string{});
      if (!reference || !other) co_return refused(404, "two runs have a number each: /api/v1/compare/1/2");
      const auto compare = [this, a = *reference, b = *other] { return comparison(a, b); };
      co_return co_await on_pool(compare);
    }
    co_return refused(404, "there is no /api/v1/" + path);
  }

  [[nodiscard]] json state() const {
    return {{"program", "loadstair"},
            {"version", parts_.version},
            {"bench", parts_.bench.hookup().bench},
            {"hookup", parts_.bench.hookup().text},
            {"record", parts_.record.path()},
            {"run", to_json(parts_.sequencer.snapshot(), parts_.bench.clock().utc_offset_ns())},
            {"channels", to_json(parts_.bench.channels())},
            {"instruments", to_json(parts_.bench.instruments())},
            {"hand_cautions", sequencer::hand_cautions(parts_.bench.hookup())}};
  }

  template <class Job>
  static asio::awaitable<HttpReply> run_job(Job job) {
    co_return job();
  }

  /// Runs a job on the pool and comes back to our executor with its reply.
  template <class Job>
  asio::awaitable<HttpReply> on_pool(Job job) {
    co_return co_await asio::co_spawn(parts_.pool, run_job(std::move(job)), asio::use_awaitable);
  }

  [[nodiscard]] HttpReply list_runs() const {
    const auto reader = parts_.record.reader();
    if (!reader) return refused(500, reader.refusal().text());
    const auto runs = reader->list_runs();
    return runs ? good(to_json(*runs)) : refused(500, runs.refusal().text());
  }

  [[nodiscard]] HttpReply results(store::RunId run) const {
    const auto reader = parts_.record.reader();
    if (!reader) return refused(500, reader.refusal().text());
    const auto result = results_of(*reader, run);
    return result ? good(to_json(*result)) : refused(404, result.refusal().text());
  }

  [[nodiscard]] HttpReply comparison(store::RunId reference, store::RunId other) const {
    const auto reader = parts_.record.reader();
    if (!reader) return refused(500, reader.refusal().text());
    const auto found = comparison_of(*reader, reference, other);
    return found ? good(to_json(*found)) : refused(404, found.refusal().text());
  }

  HttpReply change(const std::string& path, const Members& members) {
    auto& sequencer = parts_.sequencer;
    if (path == "runs") return begin(members);
    if (path == "run/stop") return done_or_refused(sequencer.stop(members.text("reason", "stopped by hand")));
    if (path == "run/resume") return done_or_refused(sequencer.resume());
    if (path == "run/skip") return done_or_refused(sequencer.skip(members.text("reason", "skipped by hand")));
    if (path.starts_with("prompt/")) return answer_prompt(path.substr(7), members);
    return refused(404, "there is no /api/v1/" + path);
  }

  HttpReply begin(const Members& members) {
    const auto stair = setup::read_stair(members.text("stair"), members.text("file", "stair"));
    if (!stair) return refused(400, stair.refusal().text());
    if (const auto fits = setup::match(*stair, parts_.bench.hookup()); !fits) {
      return refused(400, fits.refusal().text());
    }
    const auto run = parts_.sequencer.start(*stair);
    return run ? good({{"run", *run}}) : refused(409, run.refusal().text());
  }

  HttpReply answer_prompt(const std::string& what, const Members& members) {
    const auto prompt = members.whole("prompt");
    if (!prompt) return refused(400, "\"prompt\" is missing: the number of the prompt that is answered");
    const std::string by = members.text("by", "terminal");
    if (what == "answer") return done_or_refused(parts_.sequencer.answer(*prompt, by));
    if (what == "refuse") return done_or_refused(parts_.sequencer.refuse(*prompt, members.text("reason")));
    if (what == "typed") {
      sequencer::TypedEntry entry;
      entry.value = members.text("value");
      entry.unit = members.text("unit");
      entry.range = members.text("range");
      entry.last_digit = members.text("last_digit");
      entry.confirmed = members.flag("confirmed");
      return done_or_refused(parts_.sequencer.enter_typed(*prompt, entry, by));
    }
    return refused(404, "a prompt is answered, refused or typed");
  }

  ApiParts parts_;
};

}  // namespace

HttpHandler make_api(ApiParts parts) {
  auto api = std::make_shared<Api>(std::move(parts));
  return [api](HttpRequest request) { return api->answer(std::move(request)); };
}

}  // namespace loadstair::service
