// Each habit of an export in a few lines, and what is understood of it.
#include <algorithm>
#include <catch2/catch.hpp>
#include <cmath>
#include <string>
#include <vector>

#include "drivers/scope_csv/scope_csv.h"

using namespace loadstair;
using namespace loadstair::scope_csv;

namespace {

ScopeFile read(const std::string& text, const Options& options = {}) {
  auto outcome = read_scope_csv(text, "capture.csv", options);
  if (!outcome) FAIL(outcome.refusal().text());
  return std::move(*outcome);
}

std::string refusal(const std::string& text, const Options& options = {}) {
  const auto outcome = read_scope_csv(text, "capture.csv", options);
  return outcome ? "read" : outcome.refusal().text();
}

using Values = std::vector<double>;

}  // namespace

TEST_CASE("header and unit row, comma and point") {
  const auto file = read("Time,CH1,CH2\ns,V,A\n0.0,1.5,-0.25\n0.1,2.5,-0.5\n0.2,3.5,1e-3\n");
  REQUIRE(file.samples.columns.size() == 2);
  CHECK(file.samples.columns[0].name == "CH1");
  CHECK(file.samples.columns[0].unit == "V");
  CHECK(file.samples.columns[0].values == Values{1.5, 2.5, 3.5});
  CHECK(file.samples.columns[1].values == Values{-0.25, -0.5, 1e-3});
  CHECK(file.samples.interval_s == Approx(0.1).epsilon(1e-15));
  CHECK(file.understood.header_line == 1);
  CHECK(file.understood.unit_line == 2);
  CHECK(file.understood.data_line == 3);
  CHECK(file.understood.time_column == 1);
  CHECK(file.understood.rows == 3);
  CHECK(file.understood.interval_from == IntervalFrom::kTimeColumn);
}

TEST_CASE("semicolon, decimal comma, CRLF, byte-order mark, empty trailing fields") {
  const auto file =
      read("\xEF\xBB\xBFZeit (ms);U [V];I / mA;\r\n0,0;1,5;-0,25;\r\n0,1;2,5;-0,5;\r\n0,2;3,5;1E-1;\r\n\r\n");
  CHECK(file.understood.byte_order_mark);
  CHECK(file.understood.line_end == "CRLF");
  CHECK(file.understood.separator == ';');
  CHECK(file.understood.decimal_mark == ',');
  CHECK(file.understood.trailing_empty_fields == 1);
  CHECK(file.understood.time_unit == "ms");
  CHECK(file.samples.interval_s == Approx(1e-4).epsilon(1e-15));
  REQUIRE(file.samples.columns.size() == 2);
  CHECK(file.samples.columns[0].name == "U");
  CHECK(file.samples.columns[0].unit == "V");
  CHECK(file.samples.columns[1].name == "I");
  CHECK(file.samples.columns[1].unit == "A");
  CHECK(file.samples.columns[1].values == Values{-0.25e-3, -0.5e-3, 0.1e-3});
}

TEST_CASE("tabs, a preamble, microseconds in Latin-1") {
  const auto file = read("# north bench\n# step 3\nt\tu\n[\xB5s]\t[kV]\n-1\t0.1\n0\t0.2\n1\t0.3\n");
  CHECK(file.understood.separator == '\t');
  CHECK(file.samples.start_s == -1e-6);
  CHECK(file.samples.interval_s == Approx(1e-6).epsilon(1e-15));
  CHECK(file.samples.columns[0].values[2] == 0.3 * 1e3);
}

TEST_CASE("no header at all: the column that rises evenly is the time, and that is said") {
  const auto file = read("0.0,5\n0.5,6\n1.0,4\n1.5,5\n");
  CHECK(file.understood.time_column == 1);
  CHECK_FALSE(file.understood.time_unit_stated);
  REQUIRE(file.samples.columns.size() == 1);
  CHECK(file.samples.columns[0].name == "column 2");
  REQUIRE(file.understood.remarks.size() == 1);
  CHECK(file.understood.remarks[0] ==
        "Column 1 is taken for the time since it rises evenly; nothing in the file says so.");
}

TEST_CASE("the interval stands in the preamble, in many forms") {
  const std::string rows = "1.0,2.0\n1.5,2.5\n1.0,2.0\n";
  for (const std::string line :
       {"Sample Interval,2.0E-05,s", "Sample interval: 20 us", "sampling period = 20 \u00b5s",
        "Interval (ms),0.02", "\"Sample Rate\",\"50 kSa/s\"", "sampling frequency: 50000 Hz", "# Fs = 50 kHz",
        "XIncrement,2e-5", "x_increment: 0.00002"}) {
    INFO(line);
    const auto file = read(line + "\nVoltage (V),Current (A)\n" + rows);
    CHECK(file.samples.interval_s == Approx(2e-5).epsilon(1e-15));
    CHECK(file.understood.interval_from == IntervalFrom::kPreamble);
    CHECK(file.understood.interval_line == 1);
    REQUIRE(file.samples.columns.size() == 2);
    CHECK(file.samples.columns[0].name == "Voltage");
  }
}

TEST_CASE("a count of samples beside a stated interval is left out") {
  const auto file = read("Interval,1e-3\nIndex,CH1\n1,0.5\n2,0.6\n3,0.7\n");
  REQUIRE(file.samples.columns.size() == 1);
  CHECK(file.samples.columns[0].name == "CH1");
  CHECK(file.samples.interval_s == 1e-3);
  const auto unnamed = read("Interval,1e-3\n0,0.5\n1,0.6\n2,0.7\n");
  CHECK(unnamed.samples.columns.size() == 1);
}

TEST_CASE("units in words, names that are numbers, units of the preamble") {
  const auto file = read("x-axis,1,2\nsecond,Volt,Ampere\n0,1.5,2\n1e-3,2.5,3\n2e-3,3.5,4\n");
  CHECK(file.samples.columns[0].name == "1");
  CHECK(file.samples.columns[1].unit == "A");
  const auto above = read("Vertical Units,V,A\nTime,CH1,CH2\n0.0,1,2\n0.1,2,3\n0.2,3,4\n");
  CHECK(above.samples.columns[0].unit == "V");
  CHECK(above.samples.columns[1].unit == "A");
  const auto only_units = read("Seconds,Volts\n0.0,1\n0.1,2\n0.2,3\n");
  CHECK(only_units.samples.columns[0].name == "Volts");
  CHECK(only_units.samples.columns[0].unit == "V");
  const auto unknown = read("Time (s),Force (furlong)\n0.0,1\n0.1,2\n0.2,3\n");
  CHECK(unknown.samples.columns[0].name == "Force (furlong)");
}

TEST_CASE("infinities, overload words and blanks are counted, and stand as missing") {
  const auto file = read("Time,CH1,CH2\n0.0,1,2\n0.1,inf,\n0.2,-inf,nan\n0.3,OL,9.91E37\n0.4,2,3\n");
  const auto& first = file.samples.columns[0];
  const auto& second = file.samples.columns[1];
  CHECK(first.clipped_high == 2);
  CHECK(first.clipped_low == 1);
  CHECK(first.blank == 0);
  CHECK(second.blank == 3);
  CHECK(std::isnan(first.values[1]));
  CHECK(std::isnan(second.values[3]));
  CHECK(first.values[4] == 2.0);
  const auto sentences = file.understood.sentences(file.samples);
  CHECK(
      std::find(
          sentences.begin(), sentences.end(),
          "Column 2, \"CH1\", is a channel without a unit; of its samples 2 clipped high, 1 clipped low.") !=
      sentences.end());
}

TEST_CASE("quotes, around names with separators and around decimal commas") {
  const auto names = read("\"Time, s\",\"Voltage, \"\"output\"\"\"\n0.0,1\n0.1,2\n0.2,3\n");
  CHECK(names.understood.time_unit == "s");
  CHECK(names.samples.columns[0].name == "Voltage, \"output\"");
  const auto commas = read("\"Time\",\"CH1\"\n\"0,0\",\"1,5\"\n\"0,1\",\"2,5\"\n\"0,2\",\"3,5\"\n");
  CHECK(commas.understood.decimal_mark == ',');
  CHECK(commas.samples.columns[0].values == Values{1.5, 2.5, 3.5});
}

TEST_CASE("one column with decimal commas is told from two columns by its name and by leading zeros") {
  CHECK(read("interval: 1 ms\nVoltage (V)\n1,5\n2,5\n3,5\n").samples.columns[0].values ==
        Values{1.5, 2.5, 3.5});
  CHECK(read("interval: 1 ms\n1,05\n2,50\n3,55\n").samples.columns[0].values == Values{1.05, 2.5, 3.55});
  CHECK(read("interval: 1 ms\nVoltage (V),Current (A)\n1,5\n2,5\n3,5\n").samples.columns.size() == 2);
}

TEST_CASE("carriage returns alone, bars, blanks around fields, no end of the last line") {
  CHECK(read("Time,A1\r0,1.5\r0.1,2\r0.2,3").understood.line_end == "CR");
  CHECK(read("Time|A1\n0|1.5\n0.1|2\n0.2|3").understood.separator == '|');
  CHECK(read("Time , A1\n 0.0 , 1.5 \n 0.1 , 2.0 \n 0.2 , 3.0 \n").samples.columns[0].values ==
        Values{1.5, 2.0, 3.0});
}

TEST_CASE("a last line without an end but with all its digits is a row") {
  std::string text = "Time,A1\n";
  for (int k = 0; k < 20; ++k) text += "0.0" + std::to_string(k + 10) + ",1.250\n";
  text.pop_back();
  CHECK(read(text).understood.rows == 20);
  text.pop_back();
  CHECK(refusal(text).find("fewer digits") != std::string::npos);
}

TEST_CASE("padding at the end of a file is no row") {
  CHECK(read("Time,A1\n0,1.5\n0.1,2\n0.2,3\n,\n,\n").understood.rows == 3);
  CHECK(read("Time,A1\n0,1.5\n0.1,2\n0.2,3\n\n \n").understood.rows == 3);
}

TEST_CASE("a second time column must repeat the first") {
  const auto file = read("Time 1,CH1,Time 2,CH2\n0.0,1,0.0,5\n0.1,2,0.1,6\n0.2,3,0.2,7\n");
  REQUIRE(file.samples.columns.size() == 2);
  CHECK(file.samples.columns[1].name == "CH2");
  CHECK(file.understood.channel_columns == std::vector<std::size_t>{2, 4});
}

TEST_CASE("numbers in the preamble are not the data") {
  const auto file = read("Record length,3\nPosition,0.0\n12,14\nTime,CH1,CH2\n0.0,1,2\n0.1,2,3\n0.2,3,4\n");
  CHECK(file.understood.data_line == 5);
  CHECK(file.understood.header_line == 4);
}

TEST_CASE("options override what would be found") {
  Options options;
  options.interval_s = 0.5;
  const auto given = read("Time,CH1\n0.0,1\n0.1,2\n0.9,3\n", options);
  CHECK(given.samples.interval_s == 0.5);
  CHECK(given.samples.columns.size() == 1);
  CHECK(given.understood.interval_from == IntervalFrom::kOption);

  Options none;
  none.time_column = "none";
  none.interval_s = 1e-3;
  CHECK(read("Time,CH1\n0.0,1\n0.1,2\n0.9,3\n", none).samples.columns.size() == 2);

  Options time;
  time.time_column = "2";
  CHECK(read("a,b\n5,0\n6,1\n4,2\n", time).samples.interval_s == 1.0);
  time.time_column = "b";
  CHECK(read("a,b\n5,0\n6,1\n4,2\n", time).samples.columns[0].name == "a");

  Options comma;
  comma.decimal_mark = ',';
  comma.interval_s = 1.0;
  CHECK(read("1,5\n2,5\n3,5\n", comma).samples.columns[0].values == Values{1.5, 2.5, 3.5});
  Options separator;
  separator.separator = ',';
  separator.interval_s = 1.0;
  separator.time_column = "none";
  CHECK(read("1,5\n2,5\n3,5\n", separator).samples.columns.size() == 2);

  Options lines;
  lines.header_line = 1;
  lines.unit_line = 0;
  lines.data_line = 3;
  const auto placed = read("Time,CH1\n9,9\n0.0,1\n0.1,2\n0.2,3\n", lines);
  CHECK(placed.understood.rows == 3);
  CHECK(placed.samples.columns[0].name == "CH1");
}

TEST_CASE("options that do not fit the file are refused with a reason") {
  const std::string text = "Time,CH1\n0.0,1\n0.1,2\n0.2,3\n";
  Options options;
  options.separator = 'x';
  CHECK(refusal(text, options) ==
        "capture.csv: the separator may be a comma, a semicolon, a tab or a bar, not \"x\"");
  options = {};
  options.interval_s = -1.0;
  CHECK(refusal(text, options) == "capture.csv: the interval was given as -1 s; a time above 0 is wanted");
  options = {};
  options.time_column = "Zeit";
  CHECK(refusal(text, options) ==
        "capture.csv:2:1: the time column: there is no column \"Zeit\"; there are \"Time\", \"CH1\", or "
        "numbers from 1 "
        "to 2");
  options = {};
  options.data_line = 40;
  CHECK(refusal(text, options) ==
        "capture.csv:4:1: the first line of numbers was given as 40, but the file has 4 lines");
  options = {};
  options.header_line = 4;
  CHECK(refusal(text, options) ==
        "capture.csv:2:1: the data begins here; the line of names was given as 4 and must lie above");
}

TEST_CASE("a channel is named by its header or by its number in the file") {
  const auto file = read("Time,CH1,CH2,CH2\n0.0,1,2,3\n0.1,2,3,4\n0.2,3,4,5\n");
  CHECK(*find_channel(file, "CH1") == 0);
  CHECK(*find_channel(file, "3") == 1);
  CHECK(find_channel(file, "CH2").refusal().reason ==
        "2 columns are named \"CH2\"; give its number, from #1 to #4");
  CHECK(*find_channel(file, "#4") == 2);
  const auto numbered = read("x-axis,1,2\nsecond,Volt,Ampere\n0,1.5,2\n1e-3,2.5,3\n2e-3,3.5,4\n");
  CHECK(*find_channel(numbered, "#2") == 0);
  CHECK(*find_channel(numbered, "3") == 1);
  CHECK(find_channel(numbered, "2").refusal().reason ==
        "\"2\" is the name of column 3 and the number of another; say #3 or #2");
  CHECK(find_channel(file, "1").refusal().reason == "column 1, \"Time\", is the time, not a channel");
  CHECK(find_channel(file, "U").refusal().reason ==
        "there is no column \"U\"; there are \"Time\", \"CH1\", \"CH2\", \"CH2\", or numbers from 1 to 4");
}

TEST_CASE("what was understood is said in sentences") {
  const auto file = read("Marten C-003\nTime;U_out (V)\n0,0000;1,5\n0,0001;2,5\n0,0002;3,5\n");
  CHECK(
      file.understood.sentences(file.samples) ==
      std::vector<std::string>{
          "Text is UTF-8, lines end in LF; fields are separated by semicolons, the decimal mark is a comma.",
          "Line 1 is preamble, line 2 names the columns, the data begins in line 3: 3 rows.",
          "Column 1, \"Time\", is the time in s (the unit is not stated), from 0 s on; the interval is 1e-04 "
          "s (10000 "
          "samples a second), from the first and the last time over 2 steps; the times lie on it to their "
          "last "
          "printed digit, 1e-04 s.",
          "Column 2, \"U_out\", is a channel in V."});
  const auto fewer = read("Samples,2500\nTime,CH1\n0.0,1\n0.1,2\n0.2,3\n");
  REQUIRE(fewer.understood.remarks.size() == 1);
  CHECK(fewer.understood.remarks[0] == "The preamble announces 2500 samples; the file holds 3.");
}
