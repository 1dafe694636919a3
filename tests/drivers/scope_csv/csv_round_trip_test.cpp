// Random tables printed in random habits and read back equal; and long files from the disk.
#include <unistd.h>

#include <bit>
#include <catch2/catch.hpp>
#include <cmath>
#include <cstdint>
#include <cstdlib>
#include <filesystem>
#include <fstream>
#include <random>
#include <string>
#include <vector>

#include "analysis/base/number.h"
#include "drivers/scope_csv/plain_twin.h"
#include "drivers/scope_csv/scope_csv.h"

using namespace loadstair;
using namespace loadstair::scope_csv;

namespace {

class Draw {
 public:
  explicit Draw(std::uint64_t seed) : engine_{seed} {}
  std::size_t below(std::size_t limit) { return static_cast<std::size_t>(engine_() % limit); }
  bool one_in(std::size_t n) { return below(n) == 0; }
  double within(double low, double high) {
    return low + (high - low) * static_cast<double>(engine_() >> 11U) * 0x1p-53;
  }

 private:
  std::mt19937_64 engine_;
};

enum class Sample { number, high, low, blank };

/// A table in one habit, and what must be read from it.
struct Table {
  std::string text;
  std::string habit;
  double start_s = 0.0;
  double interval_s = 0.0;
  std::vector<std::vector<double>> columns;  ///< in base units; NaN for clipped and blank
  std::vector<std::size_t> clipped, blank;
};

struct Unit {
  const char* written;
  double scale;
};

std::string number_text(double value, bool scientific, int digits, char mark) {
  std::string text = scientific ? base::print_scientific(value, digits) : base::print_fixed(value, digits);
  if (const auto at = text.find('.'); at != std::string::npos) text[at] = mark;
  return text;
}

double read_back(std::string text, char mark) {
  return base::parse_number(text, mark).value();
}

Table random_table(Draw& draw) {
  static constexpr Unit kTimeUnits[] = {{"s", 1.0}, {"ms", 1e3}, {"us", 1e6}};
  static constexpr Unit kChannelUnits[] = {{"V", 1.0}, {"mV", 1e3}, {"A", 1.0}, {"mA", 1e3}};
  static constexpr char kSeparators[] = {',', ';', '\t', '|'};
  Table table;
  const char separator = kSeparators[draw.below(4)];
  const char mark = separator != ',' && draw.one_in(2) ? ',' : '.';
  const std::string line_end = draw.one_in(3) ? "\r\n" : "\n";
  const bool with_time = !draw.one_in(4);
  const bool unit_row = draw.one_in(2);
  const bool trailing = draw.one_in(4);
  const bool quotes = draw.one_in(8);
  const bool scientific = draw.one_in(2);
  const bool gaps = draw.one_in(3);
  const Unit time_unit = kTimeUnits[draw.below(3)];
  const std::size_t channels = 1 + draw.below(5);
  const std::size_t rows = 12 + draw.below(3000);
  table.interval_s =
      std::pow(10.0, -3.0 - static_cast<double>(draw.below(4))) * static_cast<double>(1 + draw.below(9));
  table.habit = std::string{"separator '"} + separator + "' mark '" + mark + "' rows " +
                std::to_string(rows) + (with_time ? " time" : " interval") + (unit_row ? " unit row" : "") +
                (quotes ? " quotes" : "");
  const auto add_line = [&](const std::vector<std::string>& fields) {
    for (std::size_t k = 0; k < fields.size(); ++k) {
      if (k != 0) table.text += separator;
      table.text += quotes && !fields[k].empty() ? '"' + fields[k] + '"' : fields[k];
    }
    if (trailing) table.text += separator;
    table.text += line_end;
  };

  if (draw.one_in(3)) table.text += "\xEF\xBB\xBF";
  for (std::size_t n = draw.below(4); n > 0; --n)
    table.text += "remark " + std::to_string(n) + " of the bench" + line_end;
  if (!with_time)
    table.text += "Sample interval: " + base::print_number(table.interval_s * 1e6) + " us" + line_end;
  std::vector<std::string> names;
  std::vector<std::string> units;
  std::vector<Unit> channel_units;
  if (with_time) {
    names.emplace_back("Time");
    units.emplace_back(time_unit.written);
  }
  for (std::size_t k = 0; k < channels; ++k) {
    channel_units.push_back(kChannelUnits[draw.below(4)]);
    names.push_back("probe " + std::string(1, static_cast<char>('a' + k)));
    units.emplace_back(channel_units[k].written);
  }
  for (std::size_t k = 0; k < names.size() && !unit_row; ++k) names[k] += " (" + units[k] + ")";
  add_line(names);
  if (unit_row) add_line(units);

  table.columns.resize(channels);
  table.clipped.resize(channels);
  table.blank.resize(channels);
  const int decimals = 3 + static_cast<int>(draw.below(6));
  for (std::size_t row = 0; row < rows; ++row) {
    std::vector<std::string> fields;
    if (with_time) {
      fields.push_back(
          number_text((static_cast<double>(row) - 5.0) * table.interval_s * time_unit.scale, false, 6, mark));
    }
    for (std::size_t k = 0; k < channels; ++k) {
      // The first row shows numbers only, as a record that begins clipped would hide its columns.
      const Sample sample =
          gaps && row > 0 && draw.one_in(9) ? static_cast<Sample>(1 + draw.below(3)) : Sample::number;
      if (sample == Sample::number || channels + (with_time ? 1 : 0) == 1) {
        const std::string text = number_text(draw.within(-500.0, 500.0), scientific, decimals, mark);
        fields.push_back(text);
        const double value = read_back(text, mark);
        table.columns[k].push_back(channel_units[k].scale == 1.0 ? value : value / channel_units[k].scale);
        continue;
      }
      fields.emplace_back(sample == Sample::high  ? "inf"
                          : sample == Sample::low ? "-inf"
                          : draw.one_in(2)        ? ""
                                                  : "nan");
      table.columns[k].push_back(std::nan(""));
      ++(sample == Sample::blank ? table.blank : table.clipped)[k];
    }
    add_line(fields);
  }
  table.start_s = with_time ? -5.0 * table.interval_s : 0.0;
  return table;
}

bool same(double a, double b) {
  return (std::isnan(a) && std::isnan(b)) ||
         std::bit_cast<std::uint64_t>(a) == std::bit_cast<std::uint64_t>(b);
}

}  // namespace

TEST_CASE("random tables in random habits are read back as printed") {
  const char* given = std::getenv("LOADSTAIR_TEST_SEED");
  const auto seed = base::parse_integer(given != nullptr ? given : "4711").value();
  Draw draw{static_cast<std::uint64_t>(seed)};
  for (int round = 0; round < 150; ++round) {
    const Table table = random_table(draw);
    INFO("LOADSTAIR_TEST_SEED=" << seed << ", round " << round << ": " << table.habit << "\n"
                                << table.text.substr(0, 400));
    const auto file = read_scope_csv(table.text, "table.csv");
    if (!file) FAIL(file.refusal().text());
    REQUIRE(file->samples.columns.size() == table.columns.size());
    CHECK(file->samples.interval_s == Approx(table.interval_s).epsilon(1e-9));
    CHECK(file->samples.start_s == Approx(table.start_s).epsilon(1e-9));
    for (std::size_t k = 0; k < table.columns.size(); ++k) {
      const auto& column = file->samples.columns[k];
      REQUIRE(column.values.size() == table.columns[k].size());
      std::size_t wrong = 0;
      for (std::size_t row = 0; row < column.values.size(); ++row) {
        if (!same(column.values[row], table.columns[k][row])) ++wrong;
      }
      CHECK(wrong == 0);
      CHECK(column.clipped_high + column.clipped_low == table.clipped[k]);
      CHECK(column.blank == table.blank[k]);
    }
  }
}

TEST_CASE("a file of many chunks is read as its bytes are, and a fault deep inside is found at its line") {
  std::string text = "Time,CH1,CH2\ns,V,A\n";
  for (int k = 0; k < 120000; ++k) {
    text += base::print_fixed(k * 1e-6, 6) + ',' + base::print_fixed(std::sin(k * 0.01) * 325.0, 4) + ',' +
            (k % 5000 == 7 ? "" : base::print_scientific(std::cos(k * 0.01), 6)) + '\n';
  }
  const auto path =
      std::filesystem::temp_directory_path() / ("loadstair-chunks-" + std::to_string(::getpid()) + ".csv");
  const auto write = [&] { std::ofstream{path, std::ios::binary} << text; };
  write();
  const auto from_disk = read_scope_csv_file(path);
  const auto from_bytes = read_scope_csv_plainly(text, "bytes.csv");
  REQUIRE(from_disk.ok());
  REQUIRE(from_bytes.ok());
  CHECK(from_disk->understood.rows == 120000);
  CHECK(from_disk->samples.columns[1].blank == 24);
  for (std::size_t k = 0; k < 2; ++k) {
    std::size_t wrong = 0;
    for (std::size_t row = 0; row < 120000; ++row) {
      if (!same(from_disk->samples.columns[k].values[row], from_bytes->samples.columns[k].values[row]))
        ++wrong;
    }
    CHECK(wrong == 0);
  }
  const auto at = text.find('\n', text.size() / 2) + 1;
  const auto line = std::count(text.begin(), text.begin() + static_cast<std::ptrdiff_t>(at), '\n') + 1;
  text.insert(at, "oops,");
  write();
  const auto broken = read_scope_csv_file(path);
  std::filesystem::remove(path);
  REQUIRE_FALSE(broken.ok());
  CHECK(broken.refusal().place == path.string() + ":" + std::to_string(line) + ":1");
}
