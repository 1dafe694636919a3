// A staircase into overload on the rehearsed bench: the knee that the evaluation finds, against the current
// at which the simulated plant itself leaves its regulation line.
#include <algorithm>
#include <catch2/catch.hpp>
#include <cmath>
#include <filesystem>
#include <string>

#include "drivers/rehearsal/plant.h"
#include "whole/virtual_bench.h"

namespace loadstair::whole {
namespace {

constexpr const char* kStair = R"({
  "format": 1,
  "prototype": {"name": "Marten", "revision": "C", "unit": "C-003"},
  "ratings": {"input_voltage_v": 385, "output_voltage_v": 230, "output_power_w": 600, "output_frequency_hz": 50},
  "overload": {"sense": "SENSE", "threshold_v": THRESHOLD, "sense_ohm": 0.1, "threshold_tolerance_percent": 2,
               "sense_tolerance_percent": 1},
  "staircase": {"control": "load", "setting": "power", "levels_percent": [50, 60, 70, 80, 90, 110, 120, 130],
                "soak_s": 1.5, "average_s": 4, "capture": true},
  "end": {"cool_down_s": 0, "discharge_s": 0.5}
})";

std::string with(std::string text, const std::string& what, const std::string& by) {
  const auto at = text.find(what);
  return text.replace(at, what.size(), by);
}

/// RMS current at which a plant like that begins to fold back: bisection over a resistance, without meters.
double true_trip(rehearsal::PlantParameters parameters) {
  double low_ohm = 40.0;
  double high_ohm = 400.0;
  double current_a = 0.0;
  for (int i = 0; i < 30; ++i) {
    const double ohm = (low_ohm + high_ohm) / 2.0;
    rehearsal::Plant plant{parameters};
    plant.settings.source_on = true;
    plant.settings.load_on = true;
    plant.settings.load_mode = rehearsal::LoadMode::resistance;
    plant.settings.load_resistance_ohm = ohm;
    for (int step = 0; step < 300; ++step) plant.step();
    current_a = std::sqrt(plant.last().output.current.mean_square);
    (plant.last().folded_back ? low_ohm : high_ohm) = ohm;
  }
  return current_a;
}

}  // namespace

TEST_CASE("the knee of a rehearsed fold-back lies within 1 % of the plant's own trip, whatever it senses") {
  struct Kind {
    const char* name;
    rehearsal::SenseKind sense;
    const char* threshold;
    double threshold_v;
  };
  const Kind kinds[] = {{"peak", rehearsal::SenseKind::peak, "0.37", 0.37},
                        {"rms", rehearsal::SenseKind::rms, "0.262", 0.262},
                        {"average", rehearsal::SenseKind::average, "0.235", 0.235}};
  const auto folder = std::filesystem::temp_directory_path() / "loadstair_fold_back";
  std::filesystem::create_directories(folder);
  for (const Kind& kind : kinds) {
    for (const double fold : {0.0, 0.3}) {
      const std::string text = with(with(kStair, "SENSE", kind.name), "THRESHOLD", kind.threshold);
      const auto stair = setup::read_stair(text, "overload.stair.json");
      REQUIRE(stair);
      rehearsal::PlantParameters parameters;
      VirtualChoice choice;
      if (fold > 0.0) choice.captures = folder.string();
      choice.adjust = [&](rehearsal::BenchDescription& bench) {
        rehearsal::OverloadParameters& overload = bench.plant.converter.overload;
        overload.threshold_v = kind.threshold_v;
        overload.sense_ohm = 0.1;
        overload.sense = kind.sense;
        overload.fold_back = fold;
        parameters = bench.plant;
      };
      const VirtualRun run = run_virtually(sample_hookup(), *stair, choice);
      REQUIRE(run.result.fold_back);
      CAPTURE(kind.name, fold, run.result.fold_back->text);
      REQUIRE(run.result.fold_back->knee_current.known);
      const double trip_a = true_trip(parameters);
      CHECK(run.result.fold_back->knee_current.value == Approx(trip_a).epsilon(0.01));
      CHECK(run.result.fold_back->knee_current.low <= trip_a);
      CHECK(run.result.fold_back->knee_current.high >= trip_a);
      CHECK(run.result.fold_back->sense == kind.name);
      // Without a capture a sine is assumed; the plant's harmonics and residue move its peak by some percent.
      if (fold > 0.0 || kind.sense != rehearsal::SenseKind::peak) {
        CHECK(run.result.fold_back->text.find("they agree") != std::string::npos);
      }
    }
  }
  std::filesystem::remove_all(folder);
}

}  // namespace loadstair::whole
