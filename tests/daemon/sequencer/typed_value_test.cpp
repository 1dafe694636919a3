// What people type at a bench. Expected values follow from decimal notation and SI prefixes.
#include "daemon/sequencer/typed_value.h"

#include <catch2/catch.hpp>

namespace loadstair::sequencer {
namespace {

setup::Channel voltmeter() {
  setup::Channel channel;
  channel.name = "input voltage";
  channel.typed = true;
  channel.unit = "V";
  channel.low = 300;
  channel.high = 420;
  setup::RangeSpec range;
  range.upto = 600;
  channel.ranges.push_back(range);
  return channel;
}

struct Row {
  TypedEntry entry;
  double value, range, last_digit;
};

TEST_CASE("typed values are read as people write them") {
  const auto row =
      GENERATE(Row{{.value = "385.2"}, 385.2, 0, 0.1}, Row{{.value = " 385,21 "}, 385.21, 0, 0.01},
               Row{{.value = "385.2 V", .range = "600"}, 385.2, 600, 0.1},
               Row{{.value = "385200 mV", .range = "600 V"}, 385.2, 600, 1e-3},
               Row{{.value = "0.3852", .unit = "kV", .range = "0.6"}, 385.2, 600, 0.1},
               Row{{.value = "385.2", .unit = "V", .range = "600", .last_digit = "0.5"}, 385.2, 600, 0.5},
               Row{{.value = "+3.852e2"}, 385.2, 0, 0.1}, Row{{.value = "385"}, 385, 0, 1},
               Row{{.value = "-1.50E3 V"}, -1500, 0, 10});
  CAPTURE(row.entry.value);
  const auto typed = read_typed(voltmeter(), row.entry);
  REQUIRE(typed.ok());
  CHECK(typed->value == Approx(row.value).epsilon(1e-14));
  CHECK(typed->range == Approx(row.range).epsilon(1e-14));
  CHECK(typed->last_digit == Approx(row.last_digit).epsilon(1e-14));
  CHECK(typed->unit == "V");
}

TEST_CASE("what is no value of this channel is refused with what would be right") {
  using Refused = std::pair<TypedEntry, std::string>;
  const auto [entry, says] = GENERATE(
      Refused{{.value = ""}, "is not a number"}, Refused{{.value = "about 385"}, "is not a number"},
      Refused{{.value = "1,385.2"}, "with a point or a comma as decimal mark, not both"},
      Refused{{.value = "385.2 A"}, "the value is given in A, but this channel is read in V"},
      Refused{{.value = "385.2", .unit = "volt"}, "is no unit that is known; expected V"},
      Refused{{.value = "385.2", .range = "big"}, "the range \"big\" is not a positive number"},
      Refused{{.value = "385.2", .last_digit = "0"}, "the last digit \"0\" is not a positive number"},
      Refused{{.value = "1e400"}, "is not a number"}, Refused{{.value = "1e13"}, "is not a number"},
      Refused{{.value = "OL"}, "higher range"});
  CAPTURE(entry.value, entry.unit);
  const auto typed = read_typed(voltmeter(), entry);
  REQUIRE_FALSE(typed.ok());
  CHECK(typed.refusal().place == "input voltage");
  CHECK_THAT(typed.refusal().reason, Catch::Contains(says));
}

TEST_CASE("a channel with a shunt is typed in what its meter shows") {
  setup::Channel channel = voltmeter();
  channel.unit = "A";
  channel.conversion.shunt = setup::Shunt{0.1, 0, 0, 0};
  CHECK(meter_unit(channel) == "V");
  CHECK(read_typed(channel, {.value = "16.3 mV"})->value == Approx(0.0163).epsilon(1e-14));
  CHECK_FALSE(read_typed(channel, {.value = "0.163 A"}).ok());
}

TEST_CASE("a resistance thermometer is typed in ohms") {
  setup::Channel channel;
  channel.quantity = setup::Quantity::temperature;
  channel.unit = "degC";
  channel.conversion.thermistor = setup::Thermistor{};
  CHECK(meter_unit(channel) == "ohm");
  CHECK(read_typed(channel, {.value = "12.5 kohm"})->value == Approx(12500.0).epsilon(1e-14));
  CHECK_FALSE(read_typed(channel, {.value = "25 degC"}).ok());
  channel.conversion.thermistor.reset();
  channel.conversion.platinum = setup::Platinum{};
  CHECK(meter_unit(channel) == "ohm");
}

TEST_CASE("implausible: outside the hook-up's span, off the range, far from the other round") {
  const auto channel = voltmeter();
  const auto why = [&channel](TypedEntry entry, std::optional<double> earlier = std::nullopt) {
    const auto typed = read_typed(channel, entry);
    REQUIRE(typed.ok());
    return why_implausible(channel, *typed, typed->value, earlier);
  };
  CHECK(why({.value = "385.2", .range = "600"}).empty());
  CHECK(why({.value = "300"}).empty());
  CHECK_THAT(why({.value = "38.52"}), Catch::Contains("below 300 V"));
  CHECK_THAT(why({.value = "3852"}), Catch::Contains("above 420 V"));
  CHECK_THAT(why({.value = "385.2", .range = "60"}), Catch::Contains("does not fit on a range of 60 V"));
  CHECK(why({.value = "385.2"}, 384.9).empty());
  CHECK_THAT(why({.value = "305.2"}, 385.2), Catch::Contains("far from 385.2 V"));
}

}  // namespace
}  // namespace loadstair::sequencer
