#include "analysis/base/unit.h"

#include <catch2/catch.hpp>

using namespace loadstair::base;

TEST_CASE("units with SI prefixes") {
  CHECK(parse_unit("mV") == ParsedUnit{1e-3, "V"});
  CHECK(parse_unit("kΩ") == ParsedUnit{1e3, "ohm"});
  CHECK(parse_unit("µA") == ParsedUnit{1e-6, "A"});
  CHECK(parse_unit("MHz") == ParsedUnit{1e6, "Hz"});
  CHECK(parse_unit("m") == std::nullopt);
  CHECK(parse_unit("°C") == ParsedUnit{1.0, "degC"});
  CHECK(parse_unit("mdegC") == std::nullopt);
  CHECK(parse_unit("VDC") == ParsedUnit{1.0, "V"});
  CHECK(parse_unit("") == std::nullopt);
}
