// A bench drawn at random: converter, load, wiring and meters, with the errors that the meters really have.
// This folder shares no code with analysis: what it draws and what it holds to be true is its own physics.
#pragma once

#include <cstdint>
#include <string>
#include <vector>

#include "daemon/setup/hookup.h"

namespace loadstair::simulation {

/// What a meter is connected to.
enum class Signal { voltage, current, power, power_factor };

/// How the variance of a meter's errors splits.
struct ErrorShares {
  double fixed = 0.8, per_run = 0.1, per_level = 0.1;
};

struct Meter {
  std::string channel;
  std::string unit_name;  ///< which meter it is; one meter may serve two channels
  Signal signal = Signal::voltage;
  bool typed = false;
  std::vector<setup::RangeSpec> ranges;
  bool names_range = false;  ///< its readings say on which range they were taken
  double headroom = 1.0;     ///< a range is taken if it holds the signal times this
  double shunt_ohm = 0.0;    ///< above zero: a voltmeter on a shunt
  double shunt_tolerance_percent = 0.0;
  double poll_s = 0.5, integration_s = 0.0, update_s = 0.0, delay_s = 0.0;
  double noise_share = 0.0;            ///< standard deviation of one conversion over full scale
  double repeatability_percent = 0.0;  ///< declared; 0: none
  double hidden_delay_s = 0.0;         ///< not declared
  ErrorShares shares;                  ///< true ones; what analysis assumes follows from the file alone
};

/// How a port's active power is had.
enum class Way { product, wattmeter, power_factor_meter, declared_power_factor };

struct PortPlan {
  bool input = true, ac = false;
  Way way = Way::product;
  bool with_product = false;  ///< a wattmeter that gives V and I too
  bool sensed = true, outer = false;
  double lead_ohm = 0.0, lead_tolerance_percent = 0.0;
  double power_factor = 1.0, least_power_factor = 1.0;
  double ripple_a = 0.0, ripple_source_ohm = 0.0;
  std::vector<Meter> meters;

  [[nodiscard]] std::string name() const { return input ? "input" : "output"; }
  [[nodiscard]] const Meter* find(Signal signal) const;
};

/// What the model of analysis does not know of.
enum class Trouble { none, nonlinearity, gain_drift, hidden_latency, burst, fan, lamps };
inline constexpr Trouble kTroubles[] = {Trouble::nonlinearity, Trouble::gain_drift, Trouble::hidden_latency,
                                        Trouble::burst,        Trouble::fan,        Trouble::lamps};
[[nodiscard]] std::string name_of(Trouble trouble);

/// One converter: its losses p0 + p1 P + p2 P^2 with P over the rated power, W.
struct Board {
  double p0_w = 0.0, p1_w = 0.0, p2_w = 0.0;
};

struct Bench {
  std::uint64_t seed = 0;
  double rated_w = 0.0, source_v = 0.0, source_ohm = 0.0, output_v = 0.0, output_ohm = 0.0;
  Board board;
  PortPlan input, output;
  std::vector<double> levels;  ///< shares of the rated power
  double window_s = 30.0;
  double drift_share = 0.0;                   ///< of the load, over the window
  double wander_share = 0.0, wander_s = 0.2;  ///< standard deviation and correlation time of the load
  Trouble trouble = Trouble::none;
};

struct BenchChoice {
  bool quiet = false;          ///< no noise, no wander, no resolution: only what specifications imply
  bool noisy = false;          ///< noise and load wander as large as the specifications' errors
  bool linked = false;         ///< no typed channels
  bool plain = false;          ///< volts and amperes at both ends, sensed, ideal wiring
  double repeatability = 0.0;  ///< declared and true: this share of the gain's limits
  ErrorShares shares;
  Trouble trouble = Trouble::none;
};

[[nodiscard]] Bench draw_bench(std::uint64_t seed, const BenchChoice& choice = {});
/// Another board of the same kind.
[[nodiscard]] Board draw_board(std::uint64_t seed, double rated_w);

/// Where one error of a meter stands between its limits, in (-1, 1): exactly rectangular, never outside, and
/// correlated between runs and levels as the shares say. The parts are normal scores put through the
/// distribution function; 2 sin(pi r / 6) is the correlation of the scores that gives r (Pearson 1907).
[[nodiscard]] double standing(const Bench& bench, const Meter& meter, const std::string& part,
                              const std::string& run, const std::string& level);
/// A resistance as it is, of a name, by its declared tolerance in percent (30 where none is).
[[nodiscard]] double true_ohm(const Bench& bench, const std::string& name, double ohm,
                              double tolerance_percent);

/// The hook-up file's content, as a person who knows the bench would declare it.
[[nodiscard]] setup::Hookup hookup_of(const Bench& bench);

}  // namespace loadstair::simulation
