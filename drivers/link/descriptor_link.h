// A link on an open file descriptor: terminals (serial ports, ptys) and sockets share it.
#pragma once

#include <boost/asio/any_io_executor.hpp>
#include <functional>
#include <memory>
#include <string>

#include "drivers/link/link.h"

namespace loadstair::link {

/// What the descriptor is decides how it is written, drained, and what its end looks like.
enum class DescriptorKind {
  terminal,    ///< a serial port or the slave side of a pty
  pty_master,  ///< EIO means that nobody has the slave open: the link waits, since somebody may come back
  socket,
};

[[nodiscard]] DescriptorKind kind_of_descriptor(int fd);

/// Takes ownership of `fd`, which becomes non-blocking.
/// close_fd  closes it (libserialport closes its own ports).
[[nodiscard]] std::unique_ptr<Link> make_descriptor_link(boost::asio::any_io_executor executor, Clock& clock,
                                                         int fd, DescriptorKind kind, std::string name,
                                                         std::function<void(int)> close_fd);

}  // namespace loadstair::link
