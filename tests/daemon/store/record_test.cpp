// What goes into a record comes out of it; what is not a record of ours is refused. R1 to R9 are the
// invariants on top of daemon/store/schema.h.
#include "daemon/store/record.h"

#include <sqlite3.h>

#include <catch2/catch.hpp>
#include <cmath>
#include <condition_variable>
#include <filesystem>
#include <fstream>
#include <mutex>

#include "sample_run.h"
#include "temporary_folder.h"

using namespace loadstair;
using namespace loadstair::store;
using namespace loadstair::store_tests;

namespace {

const WriterOptions kInline{.threaded = false};

Record open_new(const std::string& path) {
  auto record = Record::open(path, Mode::write);
  if (!record) FAIL(record.refusal().text());
  return std::move(*record);
}

std::unique_ptr<Writer> start(Record& record, WriterOptions options = kInline) {
  auto writer = Writer::start(record, std::move(options));
  if (!writer) FAIL(writer.refusal().text());
  return std::move(*writer);
}

StoredRun load(const Record& record, RunId run) {
  auto reader = record.reader();
  if (!reader) FAIL(reader.refusal().text());
  auto stored = reader->load_run(run);
  if (!stored) FAIL(stored.refusal().text());
  return std::move(*stored);
}

/// Runs one statement on a connection of its own, as a person with sqlite3 would. Returns its error message,
/// or "".
std::string by_hand(const std::string& path, const std::string& sql) {
  sqlite3* db = nullptr;
  sqlite3_open(path.c_str(), &db);
  char* message = nullptr;
  sqlite3_exec(db, sql.c_str(), nullptr, nullptr, &message);
  const std::string text = message == nullptr ? "" : message;
  sqlite3_free(message);
  sqlite3_close(db);
  return text;
}

std::int64_t number_by_hand(const std::string& path, const std::string& sql) {
  sqlite3* db = nullptr;
  sqlite3_stmt* statement = nullptr;
  sqlite3_open(path.c_str(), &db);
  sqlite3_prepare_v2(db, sql.c_str(), -1, &statement, nullptr);
  const std::int64_t number = sqlite3_step(statement) == SQLITE_ROW ? sqlite3_column_int64(statement, 0) : -1;
  sqlite3_finalize(statement);
  sqlite3_close(db);
  return number;
}

}  // namespace

TEST_CASE("a run comes back as it was posted, in UTC (R2, R3, R4)") {
  const TemporaryFolder folder;
  Record record = open_new(folder.file("record.db"));
  auto writer = start(record);
  const RunId run = post_sample_run(*writer);
  REQUIRE(writer->close().ok());
  const StoredRun stored = load(record, run);

  CHECK(stored.summary.prototype == "Marten");
  CHECK(stored.summary.state == RunState::done);
  CHECK(stored.summary.started_ns == kOffset + 5 * kSecond);
  CHECK(stored.summary.ended_ns == kOffset + 20 * kSecond);
  CHECK(stored.summary.steps == 2);
  CHECK(stored.summary.steps_done == 1);
  CHECK(stored.end_reason == "all steps done");
  CHECK(stored.seed == 0xffff'ffff'ffff'fff0ULL);
  CHECK(stored.hookup_text == sample_start().hookup_text);
  CHECK(stored.stair_text == sample_start().stair_text);
  REQUIRE(stored.profiles.size() == 2);
  CHECK(stored.profiles[1].text == "{\"a\": 1}");

  REQUIRE(stored.steps.size() == 2);
  CHECK(stored.steps[0].state == StepState::done);
  CHECK(stored.steps[0].average_begin_ns == kOffset + 10 * kSecond);
  CHECK(stored.steps[0].settled_how == "rate");
  CHECK(stored.steps[1].state == StepState::waiting);
  CHECK_FALSE(stored.steps[1].begun_ns.has_value());

  REQUIRE(stored.channels.size() == 2);
  const StoredChannel& voltage = stored.channels[0];
  CHECK(voltage.entry.instrument == "V1");
  REQUIRE(voltage.value.size() == 2);
  CHECK(voltage.value[0] == 385.012);
  CHECK(std::isnan(voltage.value[1]));
  CHECK(voltage.flags[1] == instrument::kInvalid);
  CHECK(voltage.t_ns[0] == kOffset + 11 * kSecond);
  CHECK(voltage.half_width_ns[0] == 1500);
  CHECK(voltage.range[0] == 600.0);

  auto reader = record.reader();
  REQUIRE(reader.ok());
  const auto replies = reader->load_replies(run);
  REQUIRE(replies.ok());
  REQUIRE(replies->size() == 2);
  CHECK((*replies)[0].id == voltage.reply[0]);
  CHECK((*replies)[0].text == "+3.85012E+02");
  CHECK((*replies)[0].sent_ns == kOffset + 11 * kSecond - 1000);

  REQUIRE(stored.captures.size() == 1);
  CHECK(stored.captures[0].bytes == "t,v\n0,1\n");
  // python3: hashlib.sha256(b"t,v\n0,1\n").hexdigest()
  CHECK(stored.captures[0].sha256 == "a15167f58d1c49ef5c6ef9a0cf6039452b738b2036e74cdf250557154af59383");
  REQUIRE(stored.events.size() == 1);
  CHECK(stored.events[0].utc_offset_after_ns == kOffset + 5);
  REQUIRE(stored.settings.size() == 2);
  CHECK(stored.settings[0].read_back == 29.98);
  CHECK_FALSE(stored.settings[1].read_back.has_value());
  REQUIRE(stored.prompts.size() == 1);
  CHECK(stored.prompts[0].by == "rehearsal");
  REQUIRE(stored.amendments.size() == 1);
  CHECK(stored.amendments[0].new_value == "0.1001");
}

TEST_CASE("a corrected typed answer stays, marked as superseded (R5)") {
  const TemporaryFolder folder;
  Record record = open_new(folder.file("record.db"));
  auto writer = start(record);
  const RunId run = post_sample_run(*writer);
  REQUIRE(writer->close().ok());
  const StoredRun stored = load(record, run);
  REQUIRE(stored.typed.size() == 2);
  CHECK(stored.typed[0].value == 15.6);
  CHECK(stored.typed[0].flags == (instrument::kTyped | instrument::kSuperseded));
  CHECK(stored.typed[1].value == 1.56);
  CHECK(stored.typed[1].flags == (instrument::kTyped | instrument::kImplausible));
}

TEST_CASE("a reply may hold any bytes") {
  const TemporaryFolder folder;
  Record record = open_new(folder.file("record.db"));
  auto writer = start(record);
  const RunId run = writer->begin_run(sample_start());
  ReplyItem item = sample_reply(run, kSecond, 1.0);
  item.exchange.reply = std::string{"\xff\x00\x80 OL", 6};
  writer->post(item);
  REQUIRE(writer->close().ok());
  auto reader = record.reader();
  REQUIRE(reader.ok());
  const auto replies = reader->load_replies(run);
  REQUIRE(replies.ok());
  CHECK((*replies)[0].text == item.exchange.reply);
}

TEST_CASE("a capture of several chunks comes back whole, and is counted as committed only then (R6)") {
  const TemporaryFolder folder;
  Record record = open_new(folder.file("record.db"));
  std::string bytes(3'456'789, 'x');
  for (std::size_t i = 0; i < bytes.size(); ++i) bytes[i] = static_cast<char>((i * i / 7) & 0xffU);
  const bool threaded = GENERATE(false, true);
  auto writer = start(record, {.threaded = threaded});
  const RunId run = writer->begin_run(sample_start());
  writer->post(CaptureItem{run, 1, "big.csv", "scope", kSecond, std::make_shared<const std::string>(bytes)});
  writer->post(CaptureItem{run, 1, "empty.csv", "scope", kSecond, std::make_shared<const std::string>()});
  writer->post(sample_reply(run, 2 * kSecond, 1.0));
  REQUIRE(writer->flush(std::chrono::seconds{20}).ok());
  CHECK(writer->health().committed == 4);
  const StoredRun stored = load(record, run);
  REQUIRE(stored.captures.size() == 2);
  CHECK(stored.captures[0].bytes == bytes);
  CHECK(stored.captures[1].bytes.empty());
  CHECK(number_by_hand(record.path(), "SELECT count(*) FROM capture_chunk") == 4);
}

TEST_CASE("damaged capture bytes are refused, not handed on (R6)") {
  const TemporaryFolder folder;
  Record record = open_new(folder.file("record.db"));
  auto writer = start(record);
  const RunId run = post_sample_run(*writer);
  REQUIRE(writer->close().ok());
  REQUIRE(by_hand(record.path(), "UPDATE capture_chunk SET zstd = x'28b52ffd2000010000'").empty());
  auto reader = record.reader();
  REQUIRE(reader.ok());
  const auto stored = reader->load_run(run);
  REQUIRE_FALSE(stored.ok());
  CHECK(stored.refusal().reason.find("digest") != std::string::npos);
  CHECK(reader->load_run(run, {.captures = false}).ok());
}

TEST_CASE("what is not a record of ours is refused and left alone (R1)") {
  const TemporaryFolder folder;
  const std::string path = folder.file("other.db");
  const Mode mode = GENERATE(Mode::read, Mode::write);
  SECTION("not SQLite") {
    std::ofstream{path}
        << "this is a shopping list, and long enough to be looked at as a header of a database file, "
           "which it is not, of course, being a shopping list.";
    const auto record = Record::open(path, mode);
    REQUIRE_FALSE(record.ok());
    CHECK(record.refusal().place == path);
    CHECK(record.refusal().reason.find("not a Loadstair record") != std::string::npos);
  }
  SECTION("somebody else's SQLite file") {
    REQUIRE(by_hand(path, "CREATE TABLE recipe (name TEXT)").empty());
    const auto before = std::filesystem::file_size(path);
    const auto record = Record::open(path, mode);
    REQUIRE_FALSE(record.ok());
    CHECK(record.refusal().reason.find("not a Loadstair record") != std::string::npos);
    CHECK(std::filesystem::file_size(path) == before);
  }
  SECTION("of a program to come") {
    { const Record made = open_new(path); }
    REQUIRE(by_hand(path, "PRAGMA user_version = 2").empty());
    const auto record = Record::open(path, mode);
    REQUIRE_FALSE(record.ok());
    CHECK(record.refusal().reason.find("newer program (schema 2") != std::string::npos);
  }
  SECTION("a folder") {
    std::filesystem::create_directory(path);
    const auto record = Record::open(path, mode);
    REQUIRE_FALSE(record.ok());
    CHECK(record.refusal().reason.find("folder") != std::string::npos);
  }
}

TEST_CASE("a record that is not there is made for writing and refused for reading") {
  const TemporaryFolder folder;
  CHECK_FALSE(Record::open(folder.file("none.db"), Mode::read).ok());
  CHECK_FALSE(std::filesystem::exists(folder.file("none.db")));
  CHECK_FALSE(Record::open(folder.file("no/such/folder/r.db"), Mode::write).ok());
  CHECK(Record::open(folder.file("none.db"), Mode::write).ok());
  CHECK(Record::open(folder.file("none.db"), Mode::read).ok());
}

TEST_CASE("one writer a record; it is named to the second") {
  const TemporaryFolder folder;
  const std::string path = folder.file("record.db");
  {
    const Record first = open_new(path);
    const auto second = Record::open(path, Mode::write);
    REQUIRE_FALSE(second.ok());
    CHECK(second.refusal().reason.find("another program writes") != std::string::npos);
    CHECK(second.refusal().reason.find("process") != std::string::npos);
    CHECK(Record::open(path, Mode::read).ok());
  }
  CHECK(Record::open(path, Mode::write).ok());
}

TEST_CASE("runs left running become interrupted, with their steps, once") {
  const TemporaryFolder folder;
  const std::string path = folder.file("record.db");
  {
    Record record = open_new(path);
    auto writer = start(record);
    const RunId done = post_sample_run(*writer);
    const RunId left = writer->begin_run(sample_start());
    CHECK(left == done + 1);
    StepUpdate step;
    step.run = left;
    step.state = StepState::settling;
    step.begun_ns = kSecond;
    writer->post(step);
    REQUIRE(writer->close().ok());
  }
  Record record = open_new(path);
  const auto marked = record.mark_interrupted(kOffset + 99 * kSecond);
  REQUIRE(marked.ok());
  CHECK(*marked == std::vector<RunId>{2});
  CHECK(record.mark_interrupted(kOffset)->empty());
  const StoredRun stored = load(record, 2);
  CHECK(stored.summary.state == RunState::interrupted);
  CHECK(stored.steps[0].state == StepState::stopped);
  CHECK(stored.steps[1].state == StepState::waiting);
  REQUIRE(stored.events.size() == 1);
  CHECK(stored.events[0].t_ns == kOffset + 99 * kSecond);
  CHECK(load(record, 1).summary.state == RunState::done);

  // Events of the restart go to the run that the crash left behind, on this writer's offset.
  auto writer = start(record, {.threaded = false, .utc_offset_ns = kOffset + 7});
  writer->post(EventItem{2, 1000, "command_sent", "ac load", "safe state", {}, {}});
  CHECK(writer->begin_run(sample_start()) == 3);
  REQUIRE(writer->close().ok());
  CHECK(load(record, 2).events.back().t_ns == kOffset + 7 + 1000);
}

TEST_CASE("a run owes its safe state from its first commit until the bench is said to be safe") {
  const TemporaryFolder folder;
  const std::string path = folder.file("record.db");
  {
    Record record = open_new(path);
    CHECK(record.owed_safe_states()->empty());
    auto writer = start(record);
    const RunId sealed = writer->begin_run(sample_start());
    writer->post(RunEnd{sealed, RunState::stopped, 20 * kSecond, "the load did not answer"});
    writer->post(SealItem{sealed, kOffset});
    post_sample_run(*writer);
    static_cast<void>(writer->begin_run(sample_start()));
    REQUIRE(writer->close().ok());
  }
  Record record = open_new(path);
  // Neither reading it nor marking the interrupted run uses it up: the daemon may die before the bench is
  // safe.
  CHECK(*record.mark_interrupted(kOffset) == std::vector<RunId>{3});
  CHECK(*record.owed_safe_states() == std::vector<RunId>{1, 3});
  CHECK(record.mark_interrupted(kOffset)->empty());
  CHECK(*record.owed_safe_states() == std::vector<RunId>{1, 3});
  {
    auto writer = start(record);
    writer->post(SafeStateItem{1});  // although it is sealed
    REQUIRE(writer->close().ok());
  }
  CHECK(*record.owed_safe_states() == std::vector<RunId>{3});
  CHECK(record.reader()->verify_seals().ok());
}

TEST_CASE("an item for a run that is not there is told as an event and holds up nothing") {
  const TemporaryFolder folder;
  Record record = open_new(folder.file("record.db"));
  auto writer = start(record);
  writer->post(sample_reply(77, kSecond, 1.0));
  const RunId run = post_sample_run(*writer);
  StepUpdate step;
  step.run = run;
  step.step = 9;
  writer->post(step);
  REQUIRE(writer->close().ok());
  CHECK(load(record, run).channels[0].value.size() == 2);
  auto reader = record.reader();
  const auto events = reader->events(0, 100);
  REQUIRE(events.ok());
  int refused = 0;
  for (const StoredEvent& event : *events) refused += event.kind == "refused" ? 1 : 0;
  CHECK(refused == 2);
}

TEST_CASE("the writer's thread commits by itself, within 250 ms") {
  const TemporaryFolder folder;
  Record record = open_new(folder.file("record.db"));
  std::mutex mutex;
  std::condition_variable changed;
  std::uint64_t committed = 0;
  auto writer = start(record, {.on_commit = [&](std::uint64_t number) {
                        const std::lock_guard lock{mutex};
                        committed = number;
                        changed.notify_all();
                      }});
  const RunId run = writer->begin_run(sample_start());
  std::uint64_t last = 0;
  for (int i = 0; i < 50; ++i) last = writer->post(sample_reply(run, kSecond + i, i));
  {
    std::unique_lock lock{mutex};
    REQUIRE(changed.wait_for(lock, std::chrono::seconds{20}, [&] { return committed >= last; }));
  }
  CHECK(load(record, run).channels[0].value.size() == 50);  // by another connection, while the writer lives
  CHECK(writer->health().slowest_commit < std::chrono::seconds{20});
  REQUIRE(writer->close().ok());
  CHECK(writer->post(sample_reply(run, kSecond, 1)) == 0);
  const std::string journal = record.path() + "-wal";  // a clean stop leaves nothing in it
  CHECK((!std::filesystem::exists(journal) || std::filesystem::file_size(journal) == 0));
}

TEST_CASE("nothing of a sealed run changes, amendments alone are added (R7, R8)") {
  const TemporaryFolder folder;
  Record record = open_new(folder.file("record.db"));
  const std::string& path = record.path();
  auto writer = start(record);
  const RunId run = post_sample_run(*writer);
  const RunId open = writer->begin_run(sample_start());
  writer->post(SealItem{run, kOffset + 40 * kSecond});
  writer->post(SealItem{open, kOffset});  // still running: refused
  REQUIRE(writer->flush().ok());
  CHECK(load(record, run).summary.sealed);
  CHECK_FALSE(load(record, open).summary.sealed);

  for (const char* sql :
       {"UPDATE reading SET value = 400 WHERE run = 1", "DELETE FROM reading WHERE run = 1",
        "UPDATE reading SET run = 2 WHERE run = 1", "UPDATE run SET revision = 'D' WHERE id = 1",
        "DELETE FROM run WHERE id = 1", "UPDATE step SET load_w = 1 WHERE run = 1",
        "DELETE FROM channel WHERE run = 1", "DELETE FROM run_profile WHERE run = 1",
        "UPDATE typed_answer SET value = 1 WHERE run = 1", "DELETE FROM reply WHERE run = 1",
        "DELETE FROM event WHERE run = 1", "DELETE FROM setting WHERE run = 1",
        "DELETE FROM prompt WHERE run = 1", "DELETE FROM bench_check WHERE run = 1",
        "DELETE FROM capture WHERE run = 1", "UPDATE capture_chunk SET zstd = x'00'",
        "DELETE FROM capture_chunk",
        "INSERT INTO event (run, t_ns, kind, source, text) VALUES (1, 0, '', '', '')",
        "INSERT INTO reading (run, channel, t_ns, half_width_ns, flags, range, reply) VALUES (1, 0, 0, 0, 0, "
        "0, 1)"}) {
    CHECK(by_hand(path, sql) == "the run is sealed");
  }
  for (const char* sql : {"UPDATE amendment SET new_value = '9'", "UPDATE seal SET when_ns = 1",
                          "UPDATE bench_text SET text = ''"}) {
    CHECK(by_hand(path, sql) == "never changed");
  }
  for (const char* sql : {"DELETE FROM amendment", "DELETE FROM seal", "DELETE FROM bench_text"}) {
    CHECK(by_hand(path, sql) == "never deleted");
  }
  writer->post(sample_reply(run, 50 * kSecond, 1.0));
  writer->post(AmendmentItem{run, "B. Bench", "why", kOffset, "hookup", "/x", "1", "2"});
  writer->post(sample_reply(open, 50 * kSecond, 1.0));
  REQUIRE(writer->close().ok());
  CHECK(load(record, run).channels[0].value.size() == 2);
  CHECK(load(record, run).amendments.size() == 2);
  CHECK(load(record, open).channels[0].value.size() == 1);
}

TEST_CASE("the chain of seals shows what was changed behind the triggers (R9)") {
  const TemporaryFolder folder;
  Record record = open_new(folder.file("record.db"));
  auto writer = start(record);
  for (int i = 0; i < 3; ++i) writer->post(SealItem{post_sample_run(*writer), kOffset + i});
  REQUIRE(writer->close().ok());
  auto reader = record.reader();
  REQUIRE(reader.ok());
  CHECK(reader->verify_seals().ok());
  SECTION("a reading") {
    REQUIRE(by_hand(record.path(),
                    "DROP TRIGGER reading_UPDATE_refused;"
                    "UPDATE reading SET value = 385.013 WHERE run = 2 AND value IS NOT NULL")
                .empty());
    const auto verified = reader->verify_seals();
    REQUIRE_FALSE(verified.ok());
    CHECK(verified.refusal().reason.find("run 2 is not what was sealed") == 0);
  }
  SECTION("a seal taken out") {
    REQUIRE(
        by_hand(record.path(), "DROP TRIGGER seal_DELETE_refused; DELETE FROM seal WHERE run = 2").empty());
    const auto verified = reader->verify_seals();
    REQUIRE_FALSE(verified.ok());
    CHECK(verified.refusal().reason.find("broken at run 3") != std::string::npos);
  }
}

TEST_CASE("a copy is one whole file") {
  const TemporaryFolder folder;
  Record record = open_new(folder.file("record.db"));
  auto writer = start(record);
  const RunId run = post_sample_run(*writer);
  REQUIRE(writer->flush().ok());
  REQUIRE(record.copy_to(folder.file("copy.db")).ok());
  CHECK_FALSE(record.copy_to(folder.file("copy.db")).ok());
  const auto copy = Record::open(folder.file("copy.db"), Mode::read);
  REQUIRE(copy.ok());
  CHECK(load(*copy, run).channels[0].value[0] == 385.012);
}

TEST_CASE("an unknown run is refused with the known ones") {
  const TemporaryFolder folder;
  Record record = open_new(folder.file("record.db"));
  auto reader = record.reader();
  REQUIRE(reader.ok());
  CHECK(reader->load_run(1).refusal().reason == "there is no run 1; the record holds no run yet");
  auto writer = start(record);
  post_sample_run(*writer);
  post_sample_run(*writer);
  REQUIRE(writer->close().ok());
  CHECK(reader->load_run(9).refusal().reason == "there is no run 9; the record holds runs 1 to 2");
  CHECK(reader->list_runs()->size() == 2);
}
