// Records of older programs stay readable. schema_1.db was written once, by the program of the first schema,
// from sample_run.h (one sealed run, one left running), and is never written again.
#include <catch2/catch.hpp>
#include <filesystem>

#include "daemon/store/record.h"
#include "sample_run.h"
#include "temporary_folder.h"

using namespace loadstair::store;
using namespace loadstair::store_tests;

TEST_CASE("a record of schema 1 is read, verified and gone on with") {
  const TemporaryFolder folder;
  const std::string path = folder.file("old.db");
  std::filesystem::copy_file(LOADSTAIR_SOURCE "/tests/daemon/store/schema_1.db", path);
  auto record = Record::open(path, Mode::write);
  if (!record) FAIL(record.refusal().text());
  auto reader = record->reader();
  REQUIRE(reader.ok());
  const auto runs = reader->list_runs();
  REQUIRE(runs.ok());
  REQUIRE(runs->size() == 2);
  CHECK(runs->at(0).sealed);
  CHECK(runs->at(1).state == RunState::running);
  CHECK(reader->verify_seals().ok());

  const auto run = reader->load_run(1);
  if (!run) FAIL(run.refusal().text());
  CHECK(run->channels[0].value[0] == 385.012);
  CHECK(run->typed[1].value == 1.56);
  CHECK(run->captures[0].bytes == "t,v\n0,1\n");
  CHECK(run->amendments[0].who == "A. Bench");
  CHECK(run->settings[0].read_back == 29.98);
  CHECK(run->steps[0].settled_how == "rate");

  CHECK(*record->owed_safe_states() == std::vector<RunId>{2});
  CHECK(*record->mark_interrupted(kOffset) == std::vector<RunId>{2});
  auto writer = Writer::start(*record, {.threaded = false});
  REQUIRE(writer.ok());
  CHECK(post_sample_run(**writer) == 3);
  REQUIRE((*writer)->close().ok());
  CHECK(reader->load_run(3).ok());
}
