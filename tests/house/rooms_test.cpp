// The architecture as a test: who may include whom, which words and libraries stand where.
#include <catch2/catch.hpp>
#include <fstream>

#include "house/house_rules.h"

using namespace loadstair::house;
namespace fs = std::filesystem;

namespace {

const fs::path kRoot{LOADSTAIR_SOURCE};

void put(const fs::path& file, const std::string& text) {
  fs::create_directories(file.parent_path());
  std::ofstream{file} << text;
}

std::string joined(const std::vector<std::string>& lines) {
  std::string text;
  for (const auto& line : lines) text += line + "\n";
  return text;
}

}  // namespace

TEST_CASE("every include stays within the walls of rooms.txt") {
  const Rooms rooms = read_rooms(kRoot / "tests/house/rooms.txt");
  REQUIRE(rooms.size() > 10);
  CHECK(joined(include_breaches(kRoot, rooms)) == "");
}

TEST_CASE("rooms have no circle") {
  CHECK(find_circle(read_rooms(kRoot / "tests/house/rooms.txt")) == "");
}

TEST_CASE("what CMake links is what rooms.txt allows") {
  const Rooms linked = read_rooms(LOADSTAIR_ROOMS_OF_CMAKE);
  const Rooms allowed = read_rooms(kRoot / "tests/house/rooms.txt");
  CHECK(linked.size() == allowed.size());
  for (const auto& [room, below] : allowed) {
    INFO(room);
    REQUIRE(linked.contains(room));
    CHECK(linked.at(room) == below);
  }
}

TEST_CASE("banned words are absent") {
  CHECK(joined(banned_word_breaches(kRoot)) == "");
}

TEST_CASE("third-party headers stay in the room that needs them") {
  CHECK(joined(third_party_breaches(kRoot)) == "");
}

TEST_CASE("nothing is built inside a co_await that g++ 12 would destroy twice") {
  CHECK(joined(co_await_breaches(kRoot)) == "");
}

TEST_CASE("every room's folder has its library, and every test file is in a folder that is built") {
  const Rooms rooms = read_rooms(kRoot / "tests/house/rooms.txt");
  for (const auto& entry : fs::recursive_directory_iterator{kRoot / "tests"}) {
    if (!entry.path().filename().string().ends_with("_test.cpp")) continue;
    const fs::path folder = fs::relative(entry.path(), kRoot / "tests").parent_path();
    const std::string top = folder.begin()->string();
    INFO(entry.path());
    CHECK((rooms.contains(folder.string()) || top == "published" || top == "house" || top == "whole" ||
           top == "simulation"));
  }
}

TEST_CASE("the simulation's draws, its physics and what it holds to be true share nothing with analysis") {
  int looked_at = 0;
  for (const auto& entry : fs::directory_iterator{kRoot / "tests/simulation"}) {
    const std::string name = entry.path().stem().string();
    if (name != "draw" && name != "bench" && name != "plant" && name != "record" && name != "implied")
      continue;
    ++looked_at;
    std::ifstream file{entry.path()};
    for (std::string line; std::getline(file, line);) {
      INFO(entry.path() << ": " << line);
      CHECK((line.rfind("#include", 0) != 0 || (line.find("\"analysis/") == std::string::npos &&
                                                line.find("\"daemon/evaluation/") == std::string::npos)));
    }
  }
  CHECK(looked_at == 9);
}

TEST_CASE("the rules catch what breaks them") {
  const fs::path tree = fs::temp_directory_path() / "loadstair_house_rules";
  fs::remove_all(tree);
  put(tree / "analysis/series/a.cpp", "#include \"drivers/link/link.h\"\n");
  put(tree / "drivers/link/b.cpp",
      "int x;\n#include \"analysis/base/outcome.h\"\n#include \"daemon/store/store.h\"\n");
  put(tree / "daemon/store/c.cpp",
      "#include <boost/beast/core.hpp>\nasio::co_spawn(io, f(), asio::detached);\n");
  put(tree / "daemon/attic/d.cpp", "\n");
  put(tree / "drivers/link/e.cpp",
      "co_await wait_for([flag] { return *flag; },\n  7);\nco_await send(a[1], {1, text});\n"
      "co_await (x ? f() : g());\nauto y = co_await read(file, limits[2]);\n");
  const Rooms rooms = {{"analysis/base", {}},
                       {"analysis/series", {"analysis/base"}},
                       {"drivers/link", {"analysis/base"}},
                       {"daemon/store", {}}};
  const std::string includes = joined(include_breaches(tree, rooms));
  CHECK(includes.find("analysis/series/a.cpp:1: analysis/series may not include drivers/link") !=
        std::string::npos);
  CHECK(includes.find("drivers/link/b.cpp:3: drivers/link may not include daemon/store") !=
        std::string::npos);
  CHECK(includes.find("rooms.txt does not name the room daemon/attic") != std::string::npos);
  CHECK(includes.find("b.cpp:2") == std::string::npos);
  CHECK(joined(third_party_breaches(tree))
            .find("daemon/store/c.cpp:1: daemon/store may not use <boost/beast") != std::string::npos);
  CHECK(joined(banned_word_breaches(tree)).find("daemon/store/c.cpp:2: a detached task") !=
        std::string::npos);
  const std::string awaited = joined(co_await_breaches(tree));
  CHECK(awaited.find("e.cpp:1: a closure") != std::string::npos);
  CHECK(awaited.find("e.cpp:3: an aggregate") != std::string::npos);
  CHECK(awaited.find("e.cpp:4: ?:") != std::string::npos);
  CHECK(awaited.find("e.cpp:5") == std::string::npos);
  CHECK(find_circle({{"a", {"b"}}, {"b", {"c"}}, {"c", {"a"}}}) == "a -> b -> c -> a");
  fs::remove_all(tree);
}
