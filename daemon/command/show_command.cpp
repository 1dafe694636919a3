#include <filesystem>
#include <iostream>
#include <nlohmann/json.hpp>

#include "analysis/base/number.h"
#include "daemon/command/commands.h"
#include "daemon/command/daemon_client.h"
#include "daemon/command/figures_text.h"
#include "daemon/command/result_text.h"
#include "daemon/command/user_error.h"
#include "daemon/service/result_json.h"
#include "daemon/store/reader.h"
#include "daemon/store/record.h"

namespace loadstair::command {
namespace {

using nlohmann::json;

/// The daemon's answers when it is there, the same from the record itself otherwise.
class Source {
 public:
  explicit Source(const std::string& record) : daemon_{running_daemon(record)} {
    if (daemon_) return;
    if (record.empty()) {
      throw UserError{"no daemon is running; name the record with --record FILE"};
    }
    record_.emplace(take(store::Record::open(record, store::Mode::read)));
    reader_.emplace(take(record_->reader()));
  }

  [[nodiscard]] json runs() const {
    if (daemon_) return take(daemon_->get("runs"));
    return service::to_json(take(reader_->list_runs()));
  }

  [[nodiscard]] json results(std::int64_t run) const {
    if (daemon_) return take(daemon_->get("runs/" + base::print_integer(run)));
    return service::to_json(take(service::results_of(*reader_, run)));
  }

 private:
  std::optional<DaemonClient> daemon_;
  std::optional<store::Record> record_;
  std::optional<store::Reader> reader_;
};

/// A step by its label, or by its number from 1 where no label says that.
const json& step_of(const json& result, const std::string& named) {
  std::string labels;
  const auto& steps = result["steps"];
  for (const auto& step : steps) {
    if (step["label"] == named) return step;
    labels += (labels.empty() ? "" : ", ") + step["label"].get<std::string>();
  }
  const auto number = base::parse_integer(named);
  if (number && *number >= 1 && *number <= static_cast<std::int64_t>(steps.size()))
    return steps[static_cast<std::size_t>(*number - 1)];
  throw UserError{"run " + base::print_integer(result["run"].get<std::int64_t>()) + " has no step \"" +
                  named + "\"; its steps: " + labels + " (or a number from 1)"};
}

}  // namespace

int list_runs(const ShowOptions& options) {
  const json runs = Source{options.record}.runs();
  if (options.json) {
    std::cout << runs.dump(2) << "\n";
    return kGood;
  }
  if (runs.empty()) std::cout << "No run yet.\n";
  for (const auto& run : runs) {
    const auto& prototype = run["prototype"];
    std::cout << run["run"].get<std::int64_t>() << "  " << run["started"].get<std::string>() << "  "
              << prototype["name"].get<std::string>() << " revision "
              << prototype["revision"].get<std::string>() << ", unit " << prototype["unit"].get<std::string>()
              << "  " << run["state"].get<std::string>() << ", " << run["steps_done"].get<int>() << " of "
              << run["steps"].get<int>() << " steps\n";
  }
  return kGood;
}

int show_run(const ShowOptions& options) {
  const Source source{options.record};
  std::int64_t run = options.run;
  if (run == 0) {
    const json runs = source.runs();
    if (runs.empty()) throw UserError{"the record holds no run yet"};
    run = runs.back()["run"].get<std::int64_t>();
  }
  const json result = source.results(run);
  if (!options.budget.empty()) {
    const json& step = step_of(result, options.budget);
    std::cout << (options.json ? step.dump(2) + "\n" : budget_text(step));
    return kGood;
  }
  std::cout << (options.json ? result.dump(2) + "\n" : result_table(result));
  return limit_failed(result) ? kSaysNo : kGood;
}

}  // namespace loadstair::command
