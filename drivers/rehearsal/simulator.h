// Plant, meters and knobs on one time line: advanced as far as somebody asks, in fixed steps, so that what is
// read does not depend on who asked before. No links, no clock.
#pragma once

#include <cstdint>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "analysis/base/outcome.h"
#include "drivers/rehearsal/bench.h"
#include "drivers/rehearsal/history.h"

namespace loadstair::rehearsal {

class Simulator {
 public:
  explicit Simulator(const BenchDescription& description);

  /// Computes every step that begins before `time_s`. A setting made at an instant holds from the next step
  /// on.
  void advance(double time_s);
  /// What the displays of instrument `instrument` show at `time_s`.
  [[nodiscard]] std::vector<Shown> read(std::size_t instrument, double time_s);
  /// Turns a knob at `time_s`. Refusal: not a possible value.
  [[nodiscard]] base::Outcome<void> turn(Knob knob, double value, double time_s);
  [[nodiscard]] double position(Knob knob) const;

  /// A circuit: function `function` of instrument `instrument`.
  struct Circuit {
    std::size_t instrument = 0;
    std::size_t function = 0;
  };
  /// Its terminals are taken off the bench and shorted: it shows its own zero.
  void short_circuit(const Circuit& circuit, double time_s);
  /// `other` is moved to where `first` is: voltage circuits in parallel, current circuits in series (its own
  /// place is bridged). Refusal: they measure different quantities.
  [[nodiscard]] base::Outcome<void> tie(const Circuit& first, const Circuit& other, double time_s);
  /// Every circuit is where the description has it.
  void restore_wiring(double time_s);

  [[nodiscard]] const Meter& meter(std::size_t instrument) const { return meters_[instrument]; }
  [[nodiscard]] const History& history() const { return history_; }
  [[nodiscard]] const Plant& plant() const { return plant_; }

 private:
  /// An ammeter or shunt in a port, on the range it stands on.
  struct Series {
    std::size_t instrument;
    std::size_t function;
    std::size_t range = 0;
  };
  void gather_burdens();
  /// Moves auto-ranging ammeters to the range of their current; true when one moved.
  bool range_ammeters();
  void apply_burdens();

  Plant plant_;
  History history_;
  std::vector<Meter> meters_;
  std::vector<Series> series_;
};

[[nodiscard]] bool is_switch(Knob knob);

}  // namespace loadstair::rehearsal
