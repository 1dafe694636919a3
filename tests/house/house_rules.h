// The rules of the house as functions over a tree, so that a test can also show that they catch what they
// should.
#pragma once

#include <filesystem>
#include <map>
#include <set>
#include <string>
#include <vector>

namespace loadstair::house {

using Rooms = std::map<std::string, std::set<std::string>>;

/// Reads "room: rooms it may include" lines; '#' starts a comment line.
Rooms read_rooms(const std::filesystem::path& file);

/// Every breach as "file:line: what is wrong".
std::vector<std::string> include_breaches(const std::filesystem::path& root, const Rooms& rooms);
std::vector<std::string> banned_word_breaches(const std::filesystem::path& root);
std::vector<std::string> third_party_breaches(const std::filesystem::path& root);
/// What g++ 12 destroys twice when it is built inside a co_await statement: closures with captures, braced
/// aggregates, and the branches of ?:.
std::vector<std::string> co_await_breaches(const std::filesystem::path& root);
/// A circle as "a -> b -> a"; empty when there is none.
std::string find_circle(const Rooms& rooms);

}  // namespace loadstair::house
