#include "daemon/recorder/real_links.h"

#include <boost/asio/awaitable.hpp>
#include <filesystem>
#include <utility>

#include "analysis/base/number.h"
#include "analysis/base/require.h"

namespace loadstair::recorder {
namespace {

link::Parity parity_of(const std::string& word) {
  if (word == "even") return link::Parity::even;
  if (word == "odd") return link::Parity::odd;
  return link::Parity::none;
}

}  // namespace

std::string beside(const std::string& hookup_file, const std::string& path) {
  const std::filesystem::path given{path};
  if (given.is_absolute() || hookup_file.empty()) return path;
  return (std::filesystem::path{hookup_file}.parent_path() / given).lexically_normal().string();
}

std::string describe(const setup::LinkChoice& link) {
  switch (link.kind) {
    case setup::LinkKind::serial:
      return "serial " + link.path + " at " + base::print_integer(link.baud) + " baud";
    case setup::LinkKind::tcp:
      return "tcp " + link.host + ":" + base::print_integer(link.port);
    case setup::LinkKind::folder:
      return "folder " + link.path;
  }
  return {};
}

link::Opener real_opener(link::Clock& clock, const std::string& hookup_file,
                         const setup::LinkChoice& choice) {
  base::require(choice.kind != setup::LinkKind::folder, "a folder is watched, not opened");
  if (choice.kind == setup::LinkKind::tcp) {
    return [&clock, settings = link::TcpSettings{choice.host, choice.port}] {
      return link::open_tcp(clock, settings);
    };
  }
  link::SerialSettings settings;
  settings.path = beside(hookup_file, choice.path);
  settings.baud = choice.baud;
  settings.data_bits = choice.data_bits;
  settings.parity = parity_of(choice.parity);
  settings.stop_bits = choice.stop_bits;
  return [&clock, settings] { return link::open_serial(clock, settings); };
}

}  // namespace loadstair::recorder
