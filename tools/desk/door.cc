#include "tools/desk/door.h"

#include <arpa/inet.h>
#include <fcntl.h>
#include <fmt/format.h>
#include <netdb.h>
#include <netinet/tcp.h>
#include <poll.h>
#include <sys/socket.h>
#include <unistd.h>

#include <algorithm>
#include <cerrno>
#include <cstring>
#include <utility>

#include "calib/base/problem.h"

namespace rondel::desk {
namespace {

using Clock = std::chrono::steady_clock;

void close_socket(int socket) {
  ::shutdown(socket, SHUT_RDWR);
  ::close(socket);
}

/// A blocking stream over one socket, starting with what was already received, bounded in time as a
/// whole so that a body sent drop by drop cannot hold a worker.
class VisitorStream final : public httplib::Stream {
 public:
  VisitorStream(int socket, std::string& received, Clock::time_point until)
      : socket_(socket), received_(received), until_(until) {}

  [[nodiscard]] bool is_readable() const override {
    return !received_.empty() || wait_for(POLLIN, until_);
  }
  // A long answer (a stream of events) may be written long after the request's own time.
  [[nodiscard]] bool is_writable() const override {
    return wait_for(POLLOUT, Clock::now() + std::chrono::seconds(5));
  }
  ssize_t read(char* data, size_t size) override {
    if (!received_.empty()) {
      const size_t count = std::min(size, received_.size());
      std::memcpy(data, received_.data(), count);
      received_.erase(0, count);
      return static_cast<ssize_t>(count);
    }
    if (!wait_for(POLLIN, until_)) return -1;
    return ::recv(socket_, data, size, 0);
  }
  ssize_t write(const char* data, size_t size) override {
    if (!is_writable()) return -1;
    return ::send(socket_, data, size, MSG_NOSIGNAL);
  }
  void get_remote_ip_and_port(std::string& ip, int& port) const override { name(ip, port, true); }
  void get_local_ip_and_port(std::string& ip, int& port) const override { name(ip, port, false); }
  [[nodiscard]] socket_t socket() const override { return socket_; }

 private:
  [[nodiscard]] bool wait_for(short what, Clock::time_point until) const {
    const auto left = std::chrono::duration_cast<std::chrono::milliseconds>(until - Clock::now());
    pollfd one{socket_, what, 0};
    return left.count() > 0 && ::poll(&one, 1, static_cast<int>(left.count())) > 0;
  }
  void name(std::string& ip, int& port, bool remote) const {
    sockaddr_in address{};
    socklen_t size = sizeof address;
    auto* generic = reinterpret_cast<sockaddr*>(&address);
    if ((remote ? ::getpeername(socket_, generic, &size)
                : ::getsockname(socket_, generic, &size)) != 0) {
      return;
    }
    char text[INET_ADDRSTRLEN] = {};
    ::inet_ntop(AF_INET, &address.sin_addr, text, sizeof text);
    ip = text;
    port = ntohs(address.sin_port);
  }

  int socket_;
  std::string& received_;
  Clock::time_point until_;
};

}  // namespace

Door::Door(DoorLimits limits) : limits_(limits) {
  set_payload_max_length(limits_.body_bytes);
  if (::pipe2(wake_, O_NONBLOCK | O_CLOEXEC) != 0) {
    throw InputError("", "desk: no pipe can be made; close some programs and try again");
  }
}

Door::~Door() {
  for (const int end : {listener_, wake_[0], wake_[1]}) {
    if (end >= 0) ::close(end);
  }
}

int Door::open(const std::string& host, int port) {
  addrinfo hints{};
  hints.ai_family = AF_INET;
  hints.ai_socktype = SOCK_STREAM;
  hints.ai_flags = AI_PASSIVE;
  addrinfo* found = nullptr;
  if (::getaddrinfo(host.c_str(), std::to_string(port).c_str(), &hints, &found) != 0) {
    throw InputError("--host", fmt::format("'{}' is no address of this machine", host));
  }
  listener_ = ::socket(found->ai_family, SOCK_STREAM | SOCK_NONBLOCK | SOCK_CLOEXEC, 0);
  const int yes = 1;
  ::setsockopt(listener_, SOL_SOCKET, SO_REUSEADDR, &yes, sizeof yes);
  const bool bound = ::bind(listener_, found->ai_addr, found->ai_addrlen) == 0 &&
                     ::listen(listener_, SOMAXCONN) == 0;
  const int error = errno;
  ::freeaddrinfo(found);
  if (!bound) {
    throw InputError("--port",
                     fmt::format("{}:{} cannot be used ({}); choose another with --port",
                                 host,
                                 port,
                                 std::strerror(error)));
  }
  sockaddr_in address{};
  socklen_t size = sizeof address;
  ::getsockname(listener_, reinterpret_cast<sockaddr*>(&address), &size);
  svr_sock_ = listener_;
  return ntohs(address.sin_port);
}

void Door::shut() {
  closing_ = true;
  ready_changed_.notify_all();
  [[maybe_unused]] const ssize_t sent = ::write(wake_[1], "x", 1);
}

void Door::take_in(std::vector<Visitor>& waiting) {
  while (true) {
    const int socket = ::accept4(listener_, nullptr, nullptr, SOCK_NONBLOCK | SOCK_CLOEXEC);
    if (socket < 0) return;
    const int yes = 1;
    ::setsockopt(socket, IPPROTO_TCP, TCP_NODELAY, &yes, sizeof yes);
    if (waiting.size() >= limits_.waiting_connections) {
      close_socket(waiting.front().socket);
      waiting.erase(waiting.begin());
    }
    waiting.push_back({socket, {}, Clock::now()});
  }
}

void Door::serve() {
  std::vector<std::thread> workers;
  for (int i = 0; i < limits_.workers; ++i) workers.emplace_back([this] { work(); });
  std::vector<Visitor> waiting;
  std::vector<pollfd> polled;
  while (!closing_) {
    polled.assign({{listener_, POLLIN, 0}, {wake_[0], POLLIN, 0}});
    for (const Visitor& visitor : waiting) polled.push_back({visitor.socket, POLLIN, 0});
    ::poll(polled.data(), polled.size(), 500);
    char drain[64];
    while (::read(wake_[0], drain, sizeof drain) > 0) {
    }
    // Whoever sent something: gather until the header is whole, then a worker takes over.
    std::vector<Visitor> still;
    for (std::size_t i = 0; i < waiting.size(); ++i) {
      Visitor& visitor = waiting[i];
      bool keep = true;
      if ((polled[i + 2].revents & (POLLIN | POLLHUP | POLLERR)) != 0) {
        char bytes[4096];
        const ssize_t count = ::recv(visitor.socket, bytes, sizeof bytes, 0);
        if (count > 0) {
          if (visitor.received.empty()) visitor.since = Clock::now();
          visitor.received.append(bytes, static_cast<std::size_t>(count));
        }
        keep = count > 0 || (count < 0 && (errno == EAGAIN || errno == EINTR));
      }
      const bool whole = visitor.received.find("\r\n\r\n") != std::string::npos;
      const auto age = Clock::now() - visitor.since;
      if (keep && whole) {
        const std::lock_guard lock(mutex_);
        ready_.push_back(std::move(visitor));
        ready_changed_.notify_one();
      } else if (!keep || visitor.received.size() > limits_.header_bytes ||
                 age > std::chrono::seconds(visitor.received.empty() ? 60
                                                                     : limits_.request_seconds)) {
        close_socket(visitor.socket);
      } else {
        still.push_back(std::move(visitor));
      }
    }
    waiting = std::move(still);
    {
      const std::lock_guard lock(mutex_);
      for (; !returned_.empty(); returned_.pop_front()) {
        waiting.push_back(std::move(returned_.front()));
      }
    }
    take_in(waiting);
  }
  ready_changed_.notify_all();
  for (std::thread& worker : workers) worker.join();
  for (const Visitor& visitor : waiting) close_socket(visitor.socket);
  for (const Visitor& visitor : ready_) close_socket(visitor.socket);
  for (const Visitor& visitor : returned_) close_socket(visitor.socket);
}

void Door::work() {
  while (true) {
    Visitor visitor;
    {
      std::unique_lock lock(mutex_);
      ready_changed_.wait(lock, [this] { return closing_ || !ready_.empty(); });
      if (closing_) return;
      visitor = std::move(ready_.front());
      ready_.pop_front();
    }
    answer(std::move(visitor));
  }
}

void Door::answer(Visitor visitor) {
  const auto until = Clock::now() + std::chrono::seconds(limits_.request_seconds);
  VisitorStream stream(visitor.socket, visitor.received, until);
  bool closed = false;
  const bool fine = process_request(stream, false, closed, nullptr);
  if (!fine || closed || closing_) {
    close_socket(visitor.socket);
    return;
  }
  visitor.since = Clock::now();
  {
    const std::lock_guard lock(mutex_);
    returned_.push_back(std::move(visitor));
  }
  [[maybe_unused]] const ssize_t sent = ::write(wake_[1], "x", 1);
}

}  // namespace rondel::desk
