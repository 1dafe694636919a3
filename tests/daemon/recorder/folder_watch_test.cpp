#include "daemon/recorder/folder_watch.h"

#include <catch2/catch.hpp>
#include <filesystem>
#include <fstream>

namespace loadstair::recorder {
namespace {

namespace fs = std::filesystem;

class Folder {
 public:
  Folder() {
    std::string name = (fs::temp_directory_path() / "loadstair-folder-XXXXXX").string();
    path_ = mkdtemp(name.data());
  }
  ~Folder() { fs::remove_all(path_); }
  Folder(const Folder&) = delete;
  Folder& operator=(const Folder&) = delete;

  void write(const std::string& name, const std::string& text, bool append = false) const {
    std::ofstream{path_ / name, append ? std::ios::app : std::ios::trunc} << text;
  }
  [[nodiscard]] fs::path path() const { return path_; }

 private:
  fs::path path_;
};

TEST_CASE("a scope's file is taken when two looks find it alike, and once") {
  const Folder folder;
  folder.write("old.csv", "1\n");
  FolderWatch watch{folder.path()};
  CHECK(watch.look().files.empty());
  CHECK(watch.look().files.empty());  // what was there before is old

  folder.write("new.CSV", "t,v\n");
  CHECK(watch.look().files.empty());  // may still grow
  folder.write("new.CSV", "0,1\n", true);
  CHECK(watch.look().files.empty());  // it did
  const auto found = watch.look();
  REQUIRE(found.files.size() == 1);
  CHECK(found.files[0].name == "new.CSV");
  CHECK(found.files[0].bytes == "t,v\n0,1\n");
  CHECK(watch.look().files.empty());

  SECTION("a file that grows after it was taken is taken again, whole") {
    folder.write("new.CSV", "1,2\n", true);
    CHECK(watch.look().files.empty());
    const auto again = watch.look();
    REQUIRE(again.files.size() == 1);
    CHECK(again.files[0].bytes == "t,v\n0,1\n1,2\n");
  }
  SECTION("it comes with its age, a file that was moved here with the age it had") {
    CHECK(found.files[0].age_ns >= 0);
    CHECK(found.files[0].age_ns < 60'000'000'000);
    folder.write("late.csv", "0,1\n");
    fs::last_write_time(folder.path() / "late.csv",
                        fs::file_time_type::clock::now() - std::chrono::minutes{10});
    folder.write("ahead.csv", "0,1\n");
    fs::last_write_time(folder.path() / "ahead.csv",
                        fs::file_time_type::clock::now() + std::chrono::minutes{10});
    CHECK(watch.look().files.empty());
    const auto moved = watch.look();
    REQUIRE(moved.files.size() == 2);
    CHECK(moved.files[0].age_ns == 0);
    CHECK(moved.files[1].age_ns >= 600'000'000'000);
    CHECK(moved.files[1].age_ns < 660'000'000'000);
  }
  SECTION("renamed in") {
    folder.write("part.tmp", "a\n");
    CHECK(watch.look().files.empty());
    fs::rename(folder.path() / "part.tmp", folder.path() / "done.csv");
    CHECK(watch.look().files.empty());
    CHECK(watch.look().files.size() == 1);
  }
  SECTION("other names, hidden and empty files are passed over") {
    folder.write("notes.txt", "x");
    folder.write(".hidden.csv", "x");
    folder.write("empty.csv", "");
    for (int i = 0; i < 4; ++i) CHECK(watch.look().files.empty());
  }
}

TEST_CASE("a folder that is not there is said once, and looked for again") {
  const Folder folder;
  const auto place = folder.path() / "scope";
  FolderWatch watch{place.string()};
  const auto first = watch.look();
  REQUIRE(first.events.size() == 1);
  CHECK_THAT(first.events[0], Catch::Contains("cannot look into the folder " + place.string()));
  CHECK(watch.look().events.empty());
  fs::create_directory(place);
  std::ofstream{place / "a.csv"} << "1\n";
  CHECK(watch.look().files.empty());
  CHECK(watch.look().files.size() == 1);
}

TEST_CASE("a file beyond the bound is refused once") {
  const Folder folder;
  FolderWatch watch{folder.path(), 10};
  CHECK(watch.look().files.empty());
  folder.write("big.csv", "0123456789ab");
  CHECK(watch.look().events.empty());
  const auto found = watch.look();
  CHECK(found.files.empty());
  REQUIRE(found.events.size() == 1);
  CHECK_THAT(found.events[0], Catch::Contains("12 bytes, more than 10"));
  CHECK(watch.look().events.empty());
}

}  // namespace
}  // namespace loadstair::recorder
