// The queries that docs/record.md prints do what it says of them.
#include <sqlite3.h>

#include <catch2/catch.hpp>
#include <fstream>
#include <iterator>
#include <string>
#include <vector>

#include "drivers/instrument/reading.h"

namespace {

std::string read_docs() {
  std::ifstream file{LOADSTAIR_SOURCE "/docs/record.md"};
  return {std::istreambuf_iterator<char>{file}, {}};
}

std::vector<std::string> queries_of(const std::string& docs) {
  std::vector<std::string> queries;
  const std::string fence = "```sql\n";
  for (std::size_t at = docs.find(fence); at != std::string::npos; at = docs.find(fence, at)) {
    at += fence.size();
    queries.push_back(docs.substr(at, docs.find("```", at) - at));
  }
  return queries;
}

std::vector<std::vector<std::string>> rows_of(const std::string& sql) {
  sqlite3* db = nullptr;
  sqlite3_stmt* statement = nullptr;
  std::vector<std::vector<std::string>> rows;
  sqlite3_open_v2("file:" LOADSTAIR_SOURCE "/tests/daemon/store/schema_1.db?immutable=1", &db,
                  SQLITE_OPEN_READONLY | SQLITE_OPEN_URI, nullptr);
  if (sqlite3_prepare_v2(db, sql.c_str(), -1, &statement, nullptr) != SQLITE_OK) FAIL(sqlite3_errmsg(db));
  while (sqlite3_step(statement) == SQLITE_ROW) {
    std::vector<std::string>& row = rows.emplace_back();
    for (int column = 0; column < sqlite3_column_count(statement); ++column) {
      const unsigned char* text = sqlite3_column_text(statement, column);
      row.emplace_back(text == nullptr ? "NULL" : reinterpret_cast<const char*>(text));
    }
  }
  sqlite3_finalize(statement);
  sqlite3_close(db);
  return rows;
}

}  // namespace

TEST_CASE("the queries of docs/record.md run on a record") {
  const std::string docs = read_docs();
  const auto queries = queries_of(docs);
  REQUIRE(queries.size() == 3);
  // 1 790 000 000 s + 11 s: date -u -d @1790000011
  const auto readings = rows_of(queries[0]);
  REQUIRE(readings.size() == 1);
  CHECK(readings[0] ==
        std::vector<std::string>{"2026-09-21T14:13:31.000000000Z", "5 %", "385.012", "V", "+3.85012E+02"});
  CHECK(rows_of(queries[1]) == std::vector<std::vector<std::string>>{{"input voltage", "1", "1"}});
  const auto events = rows_of(queries[2]);
  REQUIRE(events.size() == 1);
  CHECK(events[0][1] == "clock step");
}

TEST_CASE("the flags that docs/record.md adds up are those that forbid a reading's use") {
  CHECK(loadstair::instrument::kUnusable == 399);
  CHECK(read_docs().find("= 399 keep a reading out") != std::string::npos);
}
