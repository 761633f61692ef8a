#include "tools/desk/work.h"

#include <chrono>
#include <utility>

#include "calib/base/problem.h"

namespace rondel::desk {
namespace {

constexpr std::size_t kKept = 512;

}  // namespace

void Events::send(std::string_view kind, const nlohmann::ordered_json& data) {
  {
    const std::lock_guard lock(mutex_);
    events_.push_back(
        {++number_,
         std::string(kind),
         data.dump(-1, ' ', false, nlohmann::ordered_json::error_handler_t::replace)});
    if (events_.size() > kKept) events_.pop_front();
  }
  came_.notify_all();
}

std::optional<Events::Event> Events::after(std::int64_t number, std::chrono::milliseconds wait) {
  std::unique_lock lock(mutex_);
  came_.wait_for(lock, wait, [&] { return closed_ || number_ > number; });
  for (const Event& event : events_) {
    if (event.number > number) return event;
  }
  return std::nullopt;
}

std::int64_t Events::last() const {
  const std::lock_guard lock(mutex_);
  return number_;
}

void Events::close() {
  {
    const std::lock_guard lock(mutex_);
    closed_ = true;
  }
  came_.notify_all();
}

bool Events::closed() const {
  const std::lock_guard lock(mutex_);
  return closed_;
}

/// Passes progress on, at most ten times a second so that quick work does not flood the page.
class Work::Reporter final : public Progress {
 public:
  Reporter(Work& work, std::string what) : work_(work), what_(std::move(what)) {}
  void at(std::string_view part, int done, int total) override {
    const auto now = std::chrono::steady_clock::now();
    {
      const std::lock_guard lock(mutex_);
      if (done < total && now - sent_ < std::chrono::milliseconds(100)) return;
      sent_ = now;
    }
    work_.events_.send("progress",
                       {{"what", what_}, {"part", part}, {"done", done}, {"total", total}});
  }
  void note(std::string_view text) override {
    work_.events_.send("note", {{"what", what_}, {"text", text}});
  }
  [[nodiscard]] bool cancelled() const override { return work_.cancelled_; }

 private:
  Work& work_;
  std::string what_;
  std::mutex mutex_;
  std::chrono::steady_clock::time_point sent_;
};

Work::~Work() {
  cancelled_ = true;
  if (thread_.joinable()) thread_.join();
}

bool Work::start(std::string what, Job job) {
  const std::lock_guard lock(mutex_);
  if (what.empty()) what = "work";  // an empty name means that nothing is running
  if (!what_.empty()) return false;
  if (thread_.joinable()) thread_.join();
  what_ = what;
  cancelled_ = false;
  events_.send("started", {{"what", what}});
  thread_ = std::thread([this, what = std::move(what), job = std::move(job)] {
    Reporter reporter(*this, what);
    nlohmann::ordered_json ended = {{"what", what}};
    try {
      ended["result"] = job(reporter);
    } catch (const InputError& error) {
      for (const Problem& problem : error.problems()) {
        ended["problems"].push_back(to_text(problem));
      }
    } catch (const std::exception& error) {
      ended["fault"] = error.what();
    }
    ended["cancelled"] = cancelled_.load();
    {
      const std::lock_guard inner(mutex_);
      what_.clear();
    }
    events_.send("ended", ended);
  });
  return true;
}

std::string Work::running() const {
  const std::lock_guard lock(mutex_);
  return what_;
}

}  // namespace rondel::desk
