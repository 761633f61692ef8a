#pragma once

#include <atomic>
#include <condition_variable>
#include <deque>
#include <functional>
#include <mutex>
#include <nlohmann/json.hpp>
#include <optional>
#include <string>
#include <thread>

#include "calib/base/progress.h"

namespace rondel::desk {

/// What the page is told as it happens, numbered, the last few hundred kept so that a page that
/// lost its connection for a moment misses nothing.
class Events {
 public:
  void send(std::string_view kind, const nlohmann::ordered_json& data);
  /// The first event after `number`, waiting up to `wait`; none when nothing came.
  struct Event {
    std::int64_t number = 0;
    std::string kind, data;
  };
  [[nodiscard]] std::optional<Event> after(std::int64_t number, std::chrono::milliseconds wait);
  [[nodiscard]] std::int64_t last() const;
  void close();
  [[nodiscard]] bool closed() const;

 private:
  mutable std::mutex mutex_;
  std::condition_variable came_;
  std::deque<Event> events_;
  std::int64_t number_ = 0;
  bool closed_ = false;
};

/// One piece of long work at a time, in the background, reporting to Events and open to cancel.
class Work {
 public:
  using Job = std::function<nlohmann::ordered_json(Progress&)>;

  explicit Work(Events& events) : events_(events) {}
  ~Work();
  Work(const Work&) = delete;
  Work& operator=(const Work&) = delete;

  /// Starts `job` under the name `what`; false while another is running.
  bool start(std::string what, Job job);
  void cancel() { cancelled_ = true; }
  /// The name of what is running, empty when nothing is.
  [[nodiscard]] std::string running() const;

 private:
  class Reporter;
  Events& events_;
  mutable std::mutex mutex_;
  std::string what_;
  std::thread thread_;
  std::atomic<bool> cancelled_ = false;
};

}  // namespace rondel::desk
