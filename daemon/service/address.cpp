#include "daemon/service/address.h"

#include <fcntl.h>
#include <signal.h>
#include <sodium.h>
#include <sys/stat.h>
#include <unistd.h>

#include <array>
#include <cerrno>
#include <cstdlib>
#include <filesystem>
#include <fstream>
#include <nlohmann/json.hpp>

#include "analysis/base/require.h"

namespace loadstair::service {
namespace {

namespace fs = std::filesystem;
using nlohmann::json;

std::string hex_of(const unsigned char* bytes, std::size_t count) {
  std::string text(count * 2 + 1, '\0');
  sodium_bin2hex(text.data(), text.size(), bytes, count);
  text.pop_back();
  return text;
}

std::string file_for(const std::string& folder, const std::string& record) {
  std::array<unsigned char, 16> digest{};
  base::require(sodium_init() >= 0, "libsodium starts");
  crypto_generichash(digest.data(), digest.size(), reinterpret_cast<const unsigned char*>(record.data()),
                     record.size(), nullptr, 0);
  return folder + "/" + hex_of(digest.data(), digest.size()) + ".json";
}

std::optional<Address> read_address(const fs::path& file) {
  std::ifstream in{file};
  const json text = json::parse(in, nullptr, false);
  if (!text.is_object()) return std::nullopt;
  const auto whole = [&](const char* name) {
    const auto found = text.find(name);
    return found != text.end() && found->is_number_integer() ? found->get<int>() : 0;
  };
  const auto word = [&](const char* name) {
    const auto found = text.find(name);
    return found != text.end() && found->is_string() ? found->get<std::string>() : std::string{};
  };
  return Address{whole("port"), word("token"), word("record"), word("version"), whole("process")};
}

bool lives(const Address& address) {
  return address.process > 0 && (kill(address.process, 0) == 0 || errno == EPERM);
}

}  // namespace

std::string make_token() {
  base::require(sodium_init() >= 0, "libsodium starts");
  std::array<unsigned char, 32> bytes{};
  randombytes_buf(bytes.data(), bytes.size());
  return hex_of(bytes.data(), bytes.size());
}

base::Outcome<std::string> runtime_folder() {
  std::string folder;
  if (const char* own = std::getenv("LOADSTAIR_RUNTIME")) {
    folder = own;
  } else if (const char* xdg = std::getenv("XDG_RUNTIME_DIR")) {
    folder = std::string{xdg} + "/loadstair";
  } else {
    folder = "/tmp/loadstair-" + std::to_string(getuid());
  }
  std::error_code error;
  fs::create_directories(folder, error);
  struct stat state {};
  // lstat: a link that somebody laid in a folder for all is not followed.
  if (lstat(folder.c_str(), &state) != 0 || !S_ISDIR(state.st_mode) || state.st_uid != getuid() ||
      chmod(folder.c_str(), 0700) != 0) {
    return base::Refusal{folder,
                         "cannot be made a folder of this user's own; set LOADSTAIR_RUNTIME to one that can"};
  }
  return folder;
}

base::Outcome<void> publish(const Address& address) {
  const auto folder = runtime_folder();
  if (!folder) return folder.refusal();
  const std::string file = file_for(*folder, address.record);
  const std::string fresh = file + ".new";
  const json text = {{"port", address.port},
                     {"token", address.token},
                     {"record", address.record},
                     {"version", address.version},
                     {"process", address.process}};
  const std::string bytes = text.dump(2) + "\n";
  unlink(fresh.c_str());
  const int fd = open(fresh.c_str(), O_WRONLY | O_CREAT | O_EXCL | O_CLOEXEC, 0600);
  const bool written = fd >= 0 && write(fd, bytes.data(), bytes.size()) == static_cast<ssize_t>(bytes.size());
  if (fd >= 0) close(fd);
  if (!written || rename(fresh.c_str(), file.c_str()) != 0) {
    return base::Refusal{file, "cannot be written; the commands could not find this daemon"};
  }
  return {};
}

void withdraw(const Address& address) {
  const auto folder = runtime_folder();
  if (!folder) return;
  const std::string file = file_for(*folder, address.record);
  const auto found = read_address(file);
  if (found && found->process == address.process) unlink(file.c_str());
}

std::vector<Address> living_daemons() {
  std::vector<Address> found;
  const auto folder = runtime_folder();
  if (!folder) return found;
  std::error_code error;
  for (const auto& entry : fs::directory_iterator{*folder, error}) {
    if (entry.path().extension() != ".json") continue;
    if (auto address = read_address(entry.path()); address && lives(*address)) found.push_back(*address);
  }
  return found;
}

base::Outcome<std::optional<Address>> find_daemon(const std::string& record) {
  const auto all = living_daemons();
  if (!record.empty()) {
    std::error_code error;
    const std::string wanted = fs::weakly_canonical(record, error).string();
    for (const auto& address : all) {
      if (address.record == wanted) return std::optional{address};
    }
    return std::optional<Address>{};
  }
  if (all.empty()) return std::optional<Address>{};
  if (all.size() == 1) return std::optional{all.front()};
  std::string list;
  for (const auto& address : all) list += "\n  " + address.record;
  return base::Refusal{"--record",
                       "several daemons are running; name the record of the one you mean:" + list};
}

}  // namespace loadstair::service
