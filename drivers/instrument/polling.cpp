// One round of queries, and what is asked beside them.
#include "drivers/dialect/text.h"
#include "drivers/instrument/instrument_impl.h"

namespace loadstair::instrument {
namespace {

using End = Conversation::End;

/// SCPI names a function as a text in quotes (SCPI-1999 volume 2, 19.5; from memory), some instruments
/// without.
std::string_view without_quotes(std::string_view text) {
  if (text.size() < 2 || text.front() != '"' || text.back() != '"') return text;
  return text.substr(1, text.size() - 2);
}

}  // namespace

net::awaitable<bool> Instrument::Impl::round() {
  if (profile_.queries.empty()) co_return co_await check_presence();
  if (!profile_.function_query.empty()) {
    const bool linked = co_await check_function();
    if (!linked) co_return false;
    co_await talk_.pause_between();
  }
  for (std::size_t query = 0; query < profile_.queries.size(); ++query) {
    if (stopping_) co_return false;
    if (safe_) co_return true;
    if (query > 0) co_await talk_.pause_between();
    const bool linked = co_await ask_query(query);
    if (!linked) co_return false;
  }
  co_return true;
}

net::awaitable<bool> Instrument::Impl::check_presence() {
  const auto answer = co_await ask_in_step(profile_.identity_query);
  if (answer.end == End::answered && dialect::trim(answer.text) == talk_.identity()) co_return true;
  if (answer.end == End::closed) co_return false;
  co_return co_await back_in_step();
}

/// Whether the instrument still measures what its queries suppose: a knob turned by hand does not show in a
/// bare number. While it says otherwise, or says nothing, the last answer stands.
net::awaitable<bool> Instrument::Impl::check_function() {
  const std::string& query = profile_.function_query;
  const auto answer = co_await ask_in_step(query);
  if (stopping_ || answer.end == End::closed) co_return false;
  deliver(answer, query, {});
  if (answer.end != End::answered) {
    tell(EventKind::timeout, "no reply to " + query + " in time");
    co_return co_await back_in_step();
  }
  const std::string_view wanted = without_quotes(dialect::trim(profile_.function_reply));
  const std::string_view said = without_quotes(dialect::trim(answer.text));
  const bool same = said.size() == wanted.size() && dialect::begins_with_word(said, wanted);
  std::string strange{same ? std::string_view{} : said.empty() ? "nothing" : said};
  if (!same && strange != strange_function_) {
    tell(EventKind::unit_changed, "it answers '" + dialect::printable(said) + "' to " + query +
                                      " instead of '" + std::string{wanted} + "'; was a knob turned?");
  }
  strange_function_ = std::move(strange);
  co_return true;
}

}  // namespace loadstair::instrument
