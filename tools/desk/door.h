#pragma once

#include <atomic>
#include <condition_variable>
#include <deque>
#include <mutex>
#include <string>
#include <thread>
#include <vector>

#include "tools/desk/http.h"

namespace rondel::desk {

/// Bounds that keep one bad visitor from shutting out the others.
struct DoorLimits {
  std::size_t waiting_connections = 256;  ///< without a whole request yet; the oldest is dropped
  std::size_t header_bytes = 16 * 1024;
  std::size_t body_bytes = 24 * 1024 * 1024;
  int workers = 16;
  int request_seconds = 10;  ///< a started request must be complete within this
};

/// An HTTP server whose worker threads only ever see whole request headers. A connection that is
/// opened and left costs one entry of a bounded list, not a thread; the routing, parsing and
/// answering are the library's.
class Door : public httplib::Server {
 public:
  explicit Door(DoorLimits limits = {});
  ~Door() override;
  Door(const Door&) = delete;
  Door& operator=(const Door&) = delete;

  /// Binds to host:port (port 0: any free one) and answers with the port. Throws InputError when
  /// the address cannot be had.
  int open(const std::string& host, int port);
  /// Serves until shut() is called from another thread or a signal handler's flag.
  void serve();
  void shut();

 private:
  struct Visitor {
    int socket = -1;
    std::string received;
    std::chrono::steady_clock::time_point since;
  };

  void work();
  void answer(Visitor visitor);
  void take_in(std::vector<Visitor>& waiting);

  DoorLimits limits_;
  int listener_ = -1;
  int wake_[2] = {-1, -1};
  std::atomic<bool> closing_ = false;
  std::mutex mutex_;
  std::condition_variable ready_changed_;
  std::deque<Visitor> ready_;
  std::deque<Visitor> returned_;  ///< answered, kept open for the next request
};

}  // namespace rondel::desk
