#include "daemon/command/capture_command.h"

#include <unistd.h>

#include <algorithm>
#include <catch2/catch.hpp>
#include <filesystem>
#include <fstream>
#include <nlohmann/json.hpp>
#include <sstream>
#include <string>

using namespace loadstair::command;

namespace {

const std::string kSamples = LOADSTAIR_SOURCE "/sample-captures/";

struct Ran {
  int status = 0;
  std::string out;
  std::string err;
};

Ran run(const CaptureArguments& arguments) {
  std::ostringstream out;
  std::ostringstream err;
  const int status = run_capture(arguments, out, err);
  return {status, out.str(), err.str()};
}

CaptureArguments sample(const std::string& name, const std::string& voltage = "",
                        const std::string& current = "") {
  CaptureArguments arguments;
  arguments.file = kSamples + name;
  arguments.voltage = voltage;
  arguments.current = current;
  return arguments;
}

nlohmann::json json_of(CaptureArguments arguments) {
  arguments.json = true;
  const auto ran = run(arguments);
  INFO(ran.err);
  REQUIRE(ran.status == 0);
  return nlohmann::json::parse(ran.out);
}

}  // namespace

TEST_CASE("capture --json has every figure that scripts rely on") {
  const auto all = json_of(sample("marten-c003-460w.csv", "Output voltage", "3"));
  CHECK(all["samples"] == 2000);
  CHECK(all["cycles"] == 10);
  CHECK(all["interval_s"].get<double>() == Approx(1e-4).epsilon(1e-12));
  CHECK(all["frequency_hz"].get<double>() == Approx(50.0).epsilon(1e-8));
  for (const char* name : {"Output voltage", "Output current"}) {
    const auto& channel = all["channels"][name];
    for (const char* figure :
         {"mean", "rms", "peak", "crest_factor", "form_factor", "thd_f", "thd_r", "total_distortion"}) {
      INFO(name << " " << figure);
      CHECK(channel[figure].is_number());
    }
    REQUIRE(channel["harmonics"].size() == 40);
    for (const char* key : {"order", "rms", "share", "phase_deg"})
      CHECK(channel["harmonics"][6][key].is_number());
  }
  // sample-captures/README.md, closed forms.
  CHECK(all["power"]["active_w"].get<double>() == Approx(460.6830).epsilon(1e-6));
  CHECK(all["power"]["displacement_power_factor"].get<double>() == Approx(0.978148).epsilon(1e-6));
  for (const char* figure : {"apparent_va", "power_factor", "nonactive_var"})
    CHECK(all["power"][figure].is_number());
}

TEST_CASE("nothing is declared of a file's accuracy, so every estimate says so") {
  const auto all = json_of(sample("marten-c003-460w.csv", "2", "3"));
  const auto unknown = nlohmann::json{{"value", nullptr}, {"why", "uncertainty not known"}};
  CHECK(all["estimates"]["frequency_hz"] == unknown);
  CHECK(all["estimates"]["channels"]["Output voltage"]["rms"] == unknown);
  CHECK(all["estimates"]["power"]["active_w"] == unknown);
  const auto text = run(sample("marten-c003-460w.csv", "2", "3")).out;
  CHECK(text.find("Uncertainty not known") != std::string::npos);
}

TEST_CASE("without a current there is no power, and the reason stands in its place") {
  const auto all = json_of(sample("marten-c003-460w.csv", "2"));
  CHECK(all["power"]["value"].is_null());
  CHECK_FALSE(all["power"]["why"].get<std::string>().empty());
  CHECK(run(sample("marten-c003-460w.csv", "2")).out.find("active power") == std::string::npos);
}

TEST_CASE("a scale turns a shunt's volts into amperes") {
  // 10 V of triangle as the current through 0.1 ohm: 10 A per V.
  const auto all = json_of(sample("triangle-bare.csv", "", "2:10"));
  CHECK(all["channels"]["column 2"]["unit"] == "A");
  CHECK(all["channels"]["column 2"]["peak"].get<double>() == Approx(100.0).epsilon(1e-12));
  const auto negative = json_of(sample("marten-c003-460w.csv", "2:-1", "3"));
  CHECK(negative["power"]["active_w"].get<double>() == Approx(-460.6830).epsilon(1e-6));
}

TEST_CASE("clipped samples make lower bounds, marked in JSON and for a person") {
  const auto arguments = sample("marten-c003-clipped.csv", "2", "3");
  const auto bounds = json_of(arguments)["channels"]["Output voltage"]["at_least"];
  CHECK(std::find(bounds.begin(), bounds.end(), "crest_factor") != bounds.end());
  CHECK(run(arguments).out.find("\u2265 ") != std::string::npos);
}

TEST_CASE("what the user gave wrong is told with its option, status 2, and nothing is printed") {
  const auto refused = [](const CaptureArguments& arguments) {
    const auto ran = run(arguments);
    CHECK(ran.status == 2);
    CHECK(ran.out.empty());
    return ran.err;
  };
  CHECK(refused(sample("marten-c003-460w.csv", "U_out")) ==
        "--voltage: there is no column \"U_out\"; there are \"Time\", \"Output voltage\", \"Output "
        "current\", or numbers "
        "from 1 to 3\n");
  CHECK(
      refused(sample("marten-c003-460w.csv", "2:ten")) ==
      "--voltage: \"ten\" is not a scale; write COLUMN:SCALE with a number other than zero, such as 2:10\n");
  CHECK(refused(sample("marten-c003-460w.csv", "3")) ==
        "--voltage: column \"Output current\" is in A; say how many V one of them is, as COLUMN:SCALE\n");
  CHECK(refused(sample("marten-c003-460w.csv", "2", "2:5")) ==
        "--current: column \"Output voltage\" is the voltage already; name another one\n");
  CHECK(refused(sample("marten-c003-460w.csv", "1")) ==
        "--voltage: column 1, \"Time\", is the time, not a channel\n");
  auto arguments = sample("marten-c003-460w.csv");
  arguments.harmonics = 0;
  CHECK(refused(arguments) == "--harmonics: 0 is not an order from 1 to 500\n");
  arguments = sample("marten-c003-460w.csv");
  arguments.interval = "10 V";
  CHECK(refused(arguments) == "--interval: \"10 V\" is not a time; write it like 2e-05 or \"20 us\"\n");
  arguments = sample("marten-c003-460w.csv");
  arguments.separator = "semicolons";
  CHECK(refused(arguments) == "--separator: \"semicolons\" is not one of , ; | or tab\n");
  arguments = sample("no-such.csv");
  CHECK(refused(arguments) == kSamples + "no-such.csv: cannot open the file: No such file or directory\n");
}

TEST_CASE("an interval given by hand takes the place of the times") {
  auto arguments = sample("marten-c003-460w.csv", "2", "3");
  arguments.interval = "50 us";
  const auto all = json_of(arguments);
  CHECK(all["interval_s"].get<double>() == 50e-6);
  CHECK(all["frequency_hz"].get<double>() == Approx(100.0).epsilon(1e-8));
}

TEST_CASE("channels of one name are told apart by their column") {
  const auto path =
      std::filesystem::temp_directory_path() / ("loadstair-twice-" + std::to_string(::getpid()) + ".csv");
  {
    std::ofstream file{path};
    file << "Time,probe,probe\n";
    for (int k = 0; k < 40; ++k) file << 0.001 * k << "," << (k / 10 % 2) << "," << 5 << "\n";
  }
  CaptureArguments arguments;
  arguments.file = path.string();
  const auto all = json_of(arguments);
  std::filesystem::remove(path);
  CHECK(all["channels"].contains("probe (column 2)"));
  CHECK(all["channels"]["probe (column 3)"]["mean"] == 5.0);
}
