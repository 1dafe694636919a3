#include <iostream>
#include <nlohmann/json.hpp>
#include <optional>

#include "analysis/base/number.h"
#include "daemon/command/commands.h"
#include "daemon/command/daemon_client.h"
#include "daemon/command/result_text.h"
#include "daemon/command/text_table.h"
#include "daemon/command/user_error.h"
#include "daemon/service/compare_json.h"
#include "daemon/store/reader.h"
#include "daemon/store/record.h"

namespace loadstair::command {
namespace {

using nlohmann::json;

/// The daemon's comparisons when it is there, the same from the record itself otherwise.
class Source {
 public:
  explicit Source(const std::string& record) : daemon_{running_daemon(record)} {
    if (daemon_) return;
    if (record.empty()) throw UserError{"no daemon is running; name the record with --record FILE"};
    record_.emplace(take(store::Record::open(record, store::Mode::read)));
    reader_.emplace(take(record_->reader()));
  }

  [[nodiscard]] json comparison(std::int64_t reference, std::int64_t other) const {
    if (daemon_) {
      return take(
          daemon_->get("compare/" + base::print_integer(reference) + "/" + base::print_integer(other)));
    }
    return service::to_json(take(service::comparison_of(*reader_, reference, other)));
  }

 private:
  std::optional<DaemonClient> daemon_;
  std::optional<store::Record> record_;
  std::optional<store::Reader> reader_;
};

std::string run_text(const json& run, const json& unit) {
  const std::string name = unit;
  return "run " + base::print_integer(run.get<std::int64_t>()) + (name.empty() ? "" : " (unit " + name + ")");
}

std::string headline(const json& comparison) {
  std::string text = run_text(comparison["run"], comparison["unit"]) + " against " +
                     run_text(comparison["reference"], comparison["reference_unit"]);
  text.front() = 'R';
  return text;
}

std::string differences_table(const json& comparison) {
  std::vector<Row> rows = {{"level", "at W", "efficiency, points", "loss W", "decision"}};
  for (const auto& level : comparison["levels"]) {
    const bool compared = level.contains("load_w");
    rows.push_back({level["label"].get<std::string>(),
                    compared ? base::print_significant(level["load_w"].get<double>(), 4) : "-",
                    estimate_text(level["difference"], 100.0), estimate_text(level["loss_difference"]),
                    level["decision"].get<std::string>()});
  }
  for (const auto& figure : comparison["weighted"]) {
    rows.push_back({figure["label"].get<std::string>(), "-", estimate_text(figure["difference"], 100.0), "-",
                    figure["decision"].get<std::string>()});
  }
  return table_of(rows);
}

std::string sentences(const json& list, const char* key) {
  std::string text;
  for (const auto& one : list) text += "  " + (key == nullptr ? one : one[key]).get<std::string>() + "\n";
  return text;
}

std::string comparison_text(const json& comparison) {
  return headline(comparison) + "\n\n" + differences_table(comparison) + "\n" +
         sentences(comparison["levels"], "text") + sentences(comparison["weighted"], "text") + "\n" +
         sentences(comparison["remarks"], nullptr);
}

}  // namespace

int compare_runs(const CompareOptions& options) {
  if (options.runs.size() < 2) throw UserError{"a comparison takes two runs or more, the reference first"};
  const Source source{options.record};
  json all = json::array();
  for (std::size_t i = 1; i < options.runs.size(); ++i)
    all.push_back(source.comparison(options.runs.front(), options.runs[i]));
  if (options.json) {
    std::cout << (all.size() == 1 ? all.front() : all).dump(2) << "\n";
    return kGood;
  }
  std::string text;
  for (const auto& comparison : all) text += (text.empty() ? "" : "\n") + comparison_text(comparison);
  std::cout << text;
  return kGood;
}

}  // namespace loadstair::command
