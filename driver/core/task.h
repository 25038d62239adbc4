#pragma once

// The coroutine type by name only: headers need no more, sources include <boost/asio/awaitable.hpp>.
namespace boost::asio {
class any_io_executor;
template <typename T, typename Executor>
class awaitable;
}  // namespace boost::asio

namespace shuntwright {

/// Something that waits: an Asio coroutine. Cancelling it throws boost::system::system_error
/// (operation_aborted) out of the wait it is in; everything else that goes wrong is an Error value.
template <class T = void>
using Task = boost::asio::awaitable<T, boost::asio::any_io_executor>;

}  // namespace shuntwright
