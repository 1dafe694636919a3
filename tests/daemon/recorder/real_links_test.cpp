#include "daemon/recorder/real_links.h"

#include <catch2/catch.hpp>

#include "analysis/base/require.h"

namespace loadstair::recorder {
namespace {

TEST_CASE("paths of a hook-up file are relative to its folder") {
  CHECK(beside("/home/a/north.hookup.json", "bench/shunt") == "/home/a/bench/shunt");
  CHECK(beside("benches/north.hookup.json", "../scope") == "scope");
  CHECK(beside("north.hookup.json", "bench/shunt") == "bench/shunt");
  CHECK(beside("/home/a/north.hookup.json", "/dev/ttyUSB0") == "/dev/ttyUSB0");
  CHECK(beside("", "bench/shunt") == "bench/shunt");  // made by a program
}

TEST_CASE("a link in words, and no opener for a folder") {
  setup::LinkChoice link;
  link.path = "bench/shunt";
  CHECK(describe(link) == "serial bench/shunt at 9600 baud");
  link.kind = setup::LinkKind::tcp;
  link.host = "127.0.0.1";
  link.port = 5601;
  CHECK(describe(link) == "tcp 127.0.0.1:5601");
  link.kind = setup::LinkKind::folder;
  CHECK(describe(link) == "folder bench/shunt");
  const auto clock = link::make_real_clock();
  CHECK_THROWS_AS(real_opener(*clock, "", link), base::BrokenPromise);
}

}  // namespace
}  // namespace loadstair::recorder
