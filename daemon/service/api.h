// The daemon's HTTP interface, /api/v1: state, run control, prompts, runs and results.
#pragma once

#include <boost/asio/any_io_executor.hpp>
#include <string>

#include "daemon/recorder/bench.h"
#include "daemon/sequencer/sequencer.h"
#include "daemon/service/http_server.h"
#include "daemon/store/record.h"

namespace loadstair::service {

/// What the interface stands on; all of it outlives the handler.
struct ApiParts {
  sequencer::Sequencer& sequencer;
  recorder::Bench& bench;
  const store::Record& record;
  std::string token;                  ///< wanted as a bearer token for everything that changes something
  std::string version;                ///< of the program
  boost::asio::any_io_executor pool;  ///< for reading the record and evaluating
};

/// GET  /api/v1/state        program, bench, run, prompt, guards, events, channels, instruments
/// GET  /api/v1/runs         list of runs
/// GET  /api/v1/runs/N       results of run N
/// POST /api/v1/runs         {"stair": text, "file": name}: begins a run, answers {"run": N}
/// POST /api/v1/run/stop     {"reason"}
/// POST /api/v1/run/resume   {}
/// POST /api/v1/run/skip     {"reason"}
/// POST /api/v1/prompt/answer  {"prompt", "by"}
/// POST /api/v1/prompt/refuse  {"prompt", "reason"}
/// POST /api/v1/prompt/typed   {"prompt", "value", "unit", "range", "last_digit", "confirmed", "by"}
/// Errors are {"error": text} with 400 (not JSON, a member missing), 401 (no token), 404, 409 (refused as
/// things stand), 500.
[[nodiscard]] HttpHandler make_api(ApiParts parts);

}  // namespace loadstair::service
