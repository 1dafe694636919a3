// The simulation in full. usage: simulation coverage|trouble|differences|forecast [DRAWS] [FIRST SEED]
// Exit code 0: every figure is within its bounds, 1: one is not, 2: no such part.
#include <fmt/format.h>
#include <gsl/gsl_errno.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <cstdlib>
#include <string>
#include <string_view>

#include "analysis/base/number.h"
#include "simulation/study.h"

using namespace loadstair;
using namespace loadstair::simulation;

namespace {

struct Order {
  std::uint64_t draws = 2000, first = 1;
};

bool good = true;

void bound(std::string_view what, double value, double low, double high) {
  const bool within = value >= low && value <= high;
  good = good && within;
  fmt::print("{:<58}{:9.4f}  wanted {} to {}{}\n", what, value, low, high, within ? "" : "  MISSED");
}

/// Draws that do not hold of a figure, for a person who looks for the reason.
void print_worst(const Outcome& one, const Judged& judged, std::string_view what) {
  if (judged.holds()) return;
  fmt::print("  seed {} {}: truth {:.6g}, {:.6g} in {:.6g} to {:.6g}, implied half-width {:.3g}\n",
             one.bench.seed, what, judged.truth, judged.value, judged.low, judged.high, judged.implied);
}

void coverage(const Order& order) {
  const bool tell = std::getenv("SIMULATION_TELL") != nullptr;
  const Study study = run_study(order.first, order.draws, {}, [&](const Outcome& one) {
    if (!tell) return;
    print_worst(one, one.efficiency, "efficiency");
    print_worst(one, one.difference, "difference");
  });
  fmt::print("{} benches from seed {}\n{}", order.draws, order.first, described(study));
  bound("efficiency: share that holds", study.efficiency.share(), 0.93, 0.975);
  bound("loss: share that holds", study.loss.share(), 0.93, 0.975);
  bound("difference: share that holds", study.difference.share(), 0.93, 0.975);
  bound("efficiency: median half-width over noise-free", study.efficiency.median_width_ratio(), 0.95, 1.25);
  bound("loss: median half-width over noise-free", study.loss.median_width_ratio(), 0.95, 1.25);
  bound("difference: median half-width over noise-free", study.difference.median_width_ratio(), 0.95, 1.25);
  StudyChoice noisy;
  noisy.bench.noisy = noisy.bench.linked = true;
  const Study loud = run_study(order.first, order.draws, noisy);
  fmt::print("with noise as large as the specifications' errors, linked meters\n{}", described(loud));
  bound("noisy, efficiency: share that holds", loud.efficiency.share(), 0.93, 0.985);
  bound("noisy, loss: share that holds", loud.loss.share(), 0.93, 0.985);
  bound("noisy, difference: share that holds", loud.difference.share(), 0.93, 0.985);
  // Two typed rounds cannot show how a restless display strays: there the remark counts.
  noisy.bench.linked = false;
  const Study typed = run_study(order.first, order.draws, noisy);
  fmt::print("the same, some of them typed\n{}", described(typed));
  bound("noisy, typed too, efficiency: holds or remarked", typed.efficiency.share_with_warnings(), 0.93, 1.0);
  bound("noisy, typed too, difference: holds or remarked", typed.difference.share_with_warnings(), 0.93, 1.0);
}

void trouble(const Order& order) {
  for (const Trouble one : kTroubles) {
    StudyChoice choice;
    choice.bench.trouble = one;
    const Study study = run_study(order.first, order.draws, choice);
    fmt::print("{}\n{}", name_of(one), described(study));
    bound("  efficiency: holds or warned", study.efficiency.share_with_warnings(), 0.9, 1.0);
    bound("  loss: holds or warned", study.loss.share_with_warnings(), 0.9, 1.0);
    bound("  difference: holds or warned", study.difference.share_with_warnings(), 0.9, 1.0);
  }
}

void differences(const Order& order) {
  StudyChoice ideal;
  ideal.bench.quiet = ideal.bench.plain = true;
  const Study defaults = run_study(order.first, order.draws / 10, ideal);
  bound("default shares: narrowing by shared sources", median(defaults.narrowing), 2.0, 100.0);
  bound("default shares: narrowing over 1/sqrt 0.2", median(defaults.narrowing) / std::sqrt(5.0), 0.95, 1.05);
  StudyChoice repeated = ideal;
  repeated.bench.repeatability = 0.25;
  const Study declared = run_study(order.first, order.draws / 10, repeated);
  bound("repeatability declared as a quarter of the limits: narrowing", median(declared.narrowing), 3.0,
        100.0);
  bound("the same over 1/0.25", median(declared.narrowing) / 4.0, 0.95, 1.05);
  const std::array truths = {ErrorShares{0.9, 0.05, 0.05}, ErrorShares{}, ErrorShares{0.6, 0.2, 0.2}};
  for (const ErrorShares& truth : truths) {
    StudyChoice choice;
    choice.truth = truth;
    const Study study = run_study(order.first, order.draws, choice);
    fmt::print(
        "true unshared share {:.1f}, assumed 0.2: {:.2f} % of {} differences hold, half-width {:.3f} of "
        "implied\n",
        1.0 - truth.fixed, 100.0 * study.difference.share(), study.difference.counted,
        study.difference.median_width_ratio());
    if (truth.fixed >= 0.8) bound("  holds at least", study.difference.share(), 0.93, 1.0);
  }
}

void forecasts(const Order& order) {
  const std::vector<double> ratios = forecast_ratios(order.first, order.draws);
  fmt::print("{} of {} benches have both figures; one in ten below {:.3f}, one in ten above {:.3f}\n",
             ratios.size(), order.draws, quantile(ratios, 0.1), quantile(ratios, 0.9));
  bound("forecast over achieved half-width, median", median(ratios), 0.8, 1.25);
  bound("share of benches with both", static_cast<double>(ratios.size()) / static_cast<double>(order.draws),
        0.95, 1.0);
}

}  // namespace

int main(int count, char** words) {
  gsl_set_error_handler_off();
  const std::string part = count > 1 ? words[1] : "";
  Order order;
  if (count > 2)
    order.draws =
        static_cast<std::uint64_t>(std::max<std::int64_t>(1, base::parse_integer(words[2]).value_or(2000)));
  if (count > 3) order.first = static_cast<std::uint64_t>(base::parse_integer(words[3]).value_or(1));
  if (part == "coverage") {
    coverage(order);
  } else if (part == "trouble") {
    trouble(order);
  } else if (part == "differences") {
    differences(order);
  } else if (part == "forecast") {
    forecasts(order);
  } else {
    fmt::print(stderr, "usage: simulation coverage|trouble|differences|forecast [DRAWS] [FIRST SEED]\n");
    return 2;
  }
  return good ? 0 : 1;
}
