// Published tables as tests read them: a CSV file beside its SOURCE.md.
#pragma once

#include <catch2/catch.hpp>
#include <fstream>
#include <map>
#include <sstream>
#include <string>
#include <vector>

#include "analysis/base/number.h"

namespace loadstair::published {

/// One row, by column name. Quoted fields may hold commas.
using Row = std::map<std::string, std::string>;

inline std::vector<std::string> split_csv(const std::string& line) {
  std::vector<std::string> fields(1);
  bool quoted = false;
  for (const char c : line) {
    if (c == '"') {
      quoted = !quoted;
    } else if (c == ',' && !quoted) {
      fields.emplace_back();
    } else if (c != '\r') {
      fields.back() += c;
    }
  }
  return fields;
}

/// The file's rows; fails the test when the file is missing or empty. path: below tests/published.
inline std::vector<Row> read_table(const std::string& path) {
  std::ifstream file{std::string{LOADSTAIR_SOURCE} + "/tests/published/" + path};
  INFO(path);
  std::string line;
  REQUIRE(std::getline(file, line));
  const std::vector<std::string> names = split_csv(line);
  std::vector<Row> rows;
  while (std::getline(file, line)) {
    if (line.empty()) continue;
    const std::vector<std::string> fields = split_csv(line);
    REQUIRE(fields.size() == names.size());
    Row row;
    for (std::size_t i = 0; i < names.size(); ++i) row[names[i]] = fields[i];
    rows.push_back(row);
  }
  REQUIRE_FALSE(rows.empty());
  return rows;
}

/// A number of a row; fails the test when the field is not one.
inline double number(const Row& row, const std::string& column) {
  INFO(column);
  const auto parsed = base::parse_number(row.at(column));
  REQUIRE(parsed);
  return *parsed;
}

}  // namespace loadstair::published
