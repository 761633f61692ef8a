#include "tools/rondel/serial_port.h"

#include <fcntl.h>
#include <fmt/format.h>
#include <poll.h>
#include <termios.h>
#include <unistd.h>

#include <array>
#include <cerrno>
#include <cmath>
#include <cstring>

#include "calib/base/problem.h"

namespace rondel::app {
namespace {

struct Rate {
  int baud;
  speed_t speed;
};
constexpr std::array kRates = {Rate{1200, B1200},
                               Rate{2400, B2400},
                               Rate{4800, B4800},
                               Rate{9600, B9600},
                               Rate{19200, B19200},
                               Rate{38400, B38400},
                               Rate{57600, B57600},
                               Rate{115200, B115200},
                               Rate{230400, B230400},
                               Rate{460800, B460800},
                               Rate{500000, B500000},
                               Rate{921600, B921600},
                               Rate{1000000, B1000000}};

}  // namespace

SerialPort::SerialPort(const std::string& device, int baud) : device_(device) {
  speed_t speed = B0;
  std::string known;
  for (const Rate& rate : kRates) {
    if (rate.baud == baud) speed = rate.speed;
    known += fmt::format("{}{}", known.empty() ? "" : ", ", rate.baud);
  }
  if (speed == B0) {
    throw InputError(device,
                     fmt::format("{} baud is no rate a port knows; use one of {}", baud, known));
  }
  handle_ = ::open(device.c_str(), O_RDWR | O_NOCTTY | O_CLOEXEC);
  if (handle_ < 0) {
    throw InputError(
        device,
        fmt::format("cannot be opened: {}; is the board plugged in, and may you use the "
                    "port?",
                    std::strerror(errno)));
  }
  termios settings{};
  if (::tcgetattr(handle_, &settings) != 0) {
    ::close(handle_);
    throw InputError(device, "is no serial port");
  }
  ::cfmakeraw(&settings);
  settings.c_cflag |= CLOCAL | CREAD;
  settings.c_cflag &= ~static_cast<tcflag_t>(CSTOPB | CRTSCTS);
  settings.c_cc[VMIN] = 0;
  settings.c_cc[VTIME] = 0;
  ::cfsetispeed(&settings, speed);
  ::cfsetospeed(&settings, speed);
  if (::tcsetattr(handle_, TCSANOW, &settings) != 0) {
    ::close(handle_);
    throw InputError(device, fmt::format("does not take {} baud", baud));
  }
  ::tcflush(handle_, TCIOFLUSH);
}

SerialPort::~SerialPort() { ::close(handle_); }

void SerialPort::write(std::span<const std::uint8_t> bytes) {
  std::size_t done = 0;
  while (done < bytes.size()) {
    const ssize_t n = ::write(handle_, bytes.data() + done, bytes.size() - done);
    if (n < 0 && errno != EINTR) {
      throw InputError(device_, "the port is gone; plug the board in and send again");
    }
    if (n > 0) done += static_cast<std::size_t>(n);
  }
}

std::optional<std::uint8_t> SerialPort::read(double timeout_s) {
  if (held_.empty()) {
    pollfd wait{handle_, POLLIN, 0};
    if (::poll(&wait, 1, static_cast<int>(std::ceil(1e3 * timeout_s))) <= 0) return std::nullopt;
    std::array<std::uint8_t, 256> bytes{};
    const ssize_t n = ::read(handle_, bytes.data(), bytes.size());
    if (n <= 0) {
      if ((wait.revents & (POLLHUP | POLLERR)) != 0) {
        throw InputError(device_, "the port is gone; plug the board in and send again");
      }
      return std::nullopt;
    }
    held_.insert(held_.end(), bytes.begin(), bytes.begin() + n);
  }
  const std::uint8_t byte = held_.front();
  held_.pop_front();
  return byte;
}

}  // namespace rondel::app
