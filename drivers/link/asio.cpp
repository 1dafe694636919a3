// The one definition of Asio's separately compiled parts.
#include <boost/asio/impl/src.hpp>
