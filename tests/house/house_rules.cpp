#include "house/house_rules.h"

#include <fstream>
#include <functional>
#include <regex>
#include <sstream>

namespace loadstair::house {
namespace {

namespace fs = std::filesystem;

const std::vector<std::string> kHouses = {"analysis", "drivers", "daemon"};

std::string room_of(const fs::path& relative) {
  auto part = relative.begin();
  const std::string house = part->string();
  ++part;
  return part == relative.end() ? house : house + "/" + part->string();
}

bool is_source(const fs::path& file) {
  return file.extension() == ".h" || file.extension() == ".cpp";
}

/// Calls visit(relative path, line number, line) for every line of every source of the three houses.
void for_each_line(const fs::path& root,
                   const std::function<void(const fs::path&, int, const std::string&)>& visit) {
  for (const auto& house : kHouses) {
    if (!fs::exists(root / house)) continue;
    for (const auto& entry : fs::recursive_directory_iterator{root / house}) {
      if (!entry.is_regular_file() || !is_source(entry.path())) continue;
      std::ifstream in{entry.path()};
      int number = 0;
      for (std::string line; std::getline(in, line);) visit(fs::relative(entry.path(), root), ++number, line);
    }
  }
}

std::string at(const fs::path& file, int line) {
  return file.string() + ":" + std::to_string(line) + ": ";
}

/// The code of a line: without what stands in a comment. (Good enough for banned words: no string of ours
/// holds "//" before one.)
std::string without_comment(const std::string& line) {
  return line.substr(0, line.find("//"));
}

}  // namespace

Rooms read_rooms(const fs::path& file) {
  Rooms rooms;
  std::ifstream in{file};
  for (std::string line; std::getline(in, line);) {
    if (line.empty() || line.front() == '#') continue;
    const auto colon = line.find(':');
    auto& allowed = rooms[line.substr(0, colon)];
    std::string rest = line.substr(colon + 1);
    for (char& letter : rest) {
      if (letter == ';') letter = ' ';
    }
    std::istringstream words{rest};
    for (std::string word; words >> word;) allowed.insert(word);
  }
  return rooms;
}

std::vector<std::string> include_breaches(const fs::path& root, const Rooms& rooms) {
  static const std::regex quoted{R"rx(^\s*#\s*include\s+"([a-z_0-9]+)/([a-z_0-9.]+)(/|"))rx"};
  std::vector<std::string> breaches;
  std::set<std::string> unknown;
  for_each_line(root, [&](const fs::path& file, int number, const std::string& line) {
    const std::string room = room_of(file);
    if (file == "daemon/main.cpp") return;  // main only composes
    if (!rooms.contains(room)) {
      if (unknown.insert(room).second)
        breaches.push_back(at(file, 1) + "tests/house/rooms.txt does not name the room " + room);
      return;
    }
    std::smatch match;
    if (!std::regex_search(line, match, quoted) || match[1] == "embedded") return;
    const std::string included = match[1].str() + "/" + match[2].str();
    if (included == room || rooms.at(room).contains(included)) return;
    breaches.push_back(at(file, number) + room + " may not include " + included);
  });
  return breaches;
}

std::vector<std::string> banned_word_breaches(const fs::path& root) {
  struct Rule {
    std::regex pattern;
    std::string allowed_in;  // a folder in which it may stand
    std::string why;
  };
  static const std::vector<Rule> rules = {
      {std::regex{R"(\bdetached\b)"}, "-", "a detached task has no owner: spawn it into a TaskScope"},
      {std::regex{R"(\bsteady_timer\b)"}, "drivers/link", "waits go through link's clock"},
      {std::regex{R"(\bsetlocale\b)"}, "-", "numbers do not depend on a locale"},
      {std::regex{R"(\bstrto[dfl]+\b|\bsto[dfi]\b|\bstold\b|\bsscanf\b|\bato[fi]\b)"}, "-",
       "numbers are read by base"},
      {std::regex{R"(\bstd::\w+_distribution\b)"}, "-",
       "random draws are the same everywhere: our own generator"},
      {std::regex{R"(\bsleep_(for|until)\s*\(\s*std::this_thread|this_thread::sleep)"}, "-",
       "waits go through link's clock"},
      {std::regex{R"(\b(TODO|FIXME|XXX)\b)"}, "-", "nothing is left for later in the code"},
      {std::regex{R"(std::(cout|cerr)\b)"}, "daemon/command", "rooms do not print: return an outcome or log"},
  };
  std::vector<std::string> breaches;
  for_each_line(root, [&](const fs::path& file, int number, const std::string& line) {
    const std::string code = without_comment(line);
    for (const Rule& rule : rules) {
      if (file.string().starts_with(rule.allowed_in) || file == "daemon/main.cpp") continue;
      if (std::regex_search(code, rule.pattern)) breaches.push_back(at(file, number) + rule.why);
    }
  });
  return breaches;
}

std::vector<std::string> third_party_breaches(const fs::path& root) {
  struct Rule {
    std::regex header;
    std::set<std::string> rooms;
  };
  // "Third-party headers stay in the room that needs them" (docs/architecture.md).
  static const std::vector<Rule> rules = {
      {std::regex{R"(<sqlite3\.h>)"}, {"daemon/store"}},
      {std::regex{R"(<zstd\.h>)"}, {"daemon/store"}},
      {std::regex{R"(<boost/beast)"}, {"daemon/service"}},
      {std::regex{R"(<libserialport\.h>)"}, {"drivers/link"}},
      {std::regex{R"(<fftw3\.h>)"}, {"analysis/waveform"}},
      {std::regex{R"(<gsl/)"},
       {"analysis/estimate", "analysis/waveform", "analysis/settling", "analysis/efficiency"}},
      {std::regex{R"(<CLI/)"}, {"daemon/command"}},
      {std::regex{R"(<nlohmann/)"}, {"drivers/document", "daemon/service", "daemon/command"}},
      {std::regex{R"(<sodium\.h>)"}, {"daemon/store", "daemon/service", "daemon/command"}},
      {std::regex{R"(<boost/)"},
       {"drivers/link", "drivers/instrument", "drivers/rehearsal", "daemon/recorder", "daemon/sequencer",
        "daemon/service", "daemon/command"}},
  };
  std::vector<std::string> breaches;
  for_each_line(root, [&](const fs::path& file, int number, const std::string& line) {
    if (line.find("#include <") == std::string::npos || file == "daemon/main.cpp") return;
    for (const Rule& rule : rules) {
      if (std::regex_search(line, rule.header) && !rule.rooms.contains(room_of(file))) {
        breaches.push_back(at(file, number) + room_of(file) + " may not use " + line.substr(line.find('<')));
      }
    }
  });
  return breaches;
}

std::vector<std::string> co_await_breaches(const fs::path& root) {
  static const std::regex text{R"("(?:[^"\\]|\\.)*")"};
  static const std::regex closure{R"(\[[^\]0-9][^\]]*\]\s*[({])"};
  static const std::regex aggregate{R"([(,]\s*\{)"};
  std::vector<std::string> breaches;
  std::string statement;
  int began = 0;
  for_each_line(root, [&](const fs::path& file, int number, const std::string& line) {
    std::string code = std::regex_replace(without_comment(line), text, "\"\"");
    if (statement.empty()) {
      const auto at = code.find("co_await");
      if (at == std::string::npos) return;
      code = code.substr(at);
      began = number;
    }
    const auto end = code.find(';');
    statement += code.substr(0, end) + " ";
    if (end == std::string::npos) return;
    if (std::regex_search(statement, closure)) {
      breaches.push_back(at(file, began) +
                         "a closure inside co_await is destroyed twice by g++ 12: name it first");
    }
    if (std::regex_search(statement, aggregate)) {
      breaches.push_back(at(file, began) +
                         "an aggregate inside co_await is destroyed twice by g++ 12: name it first");
    }
    if (statement.find('?') != std::string::npos) {
      breaches.push_back(at(file, began) +
                         "?: inside co_await destroys its branches twice with g++ 12: name it first");
    }
    statement.clear();
  });
  return breaches;
}

std::string find_circle(const Rooms& rooms) {
  std::vector<std::string> path;
  std::set<std::string> done;
  std::string circle;
  std::function<void(const std::string&)> visit = [&](const std::string& room) {
    if (!circle.empty() || done.contains(room)) return;
    for (std::size_t i = 0; i < path.size(); ++i) {
      if (path[i] != room) continue;
      for (; i < path.size(); ++i) circle += path[i] + " -> ";
      circle += room;
      return;
    }
    path.push_back(room);
    if (const auto found = rooms.find(room); found != rooms.end()) {
      for (const auto& below : found->second) visit(below);
    }
    path.pop_back();
    done.insert(room);
  };
  for (const auto& [room, below] : rooms) visit(room);
  return circle;
}

}  // namespace loadstair::house
