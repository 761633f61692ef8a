#include "tools/rondel/hash_store.h"

#include <algorithm>
#include <atomic>
#include <chrono>
#include <exception>
#include <system_error>
#include <thread>

#include "calib/base/file.h"

namespace rondel::app {

std::string HashStore::hash_of(const std::filesystem::path& path) {
  std::error_code error;
  Entry entry;
  entry.bytes = std::filesystem::file_size(path, error);
  if (error) return "absent";
  entry.changed = std::filesystem::last_write_time(path, error);
  if (error) return "absent";
  {
    const std::lock_guard lock(mutex_);
    const auto known = entries_.find(path);
    if (known != entries_.end() && known->second.bytes == entry.bytes &&
        known->second.changed == entry.changed) {
      return known->second.hash;
    }
  }
  entry.hash = sha256_hex(read_file(path));
  // A file that changed just now may change again within the clock's grain and keep its size.
  const auto age = std::filesystem::file_time_type::clock::now() - entry.changed;
  if (age > std::chrono::seconds(1)) {
    const std::lock_guard lock(mutex_);
    entries_[path] = entry;
  }
  return entry.hash;
}

std::vector<std::string> HashStore::hashes_of(std::span<const std::filesystem::path> paths) {
  std::vector<std::string> hashes(paths.size());
  std::atomic<std::size_t> next{0};
  std::mutex failure_mutex;
  std::exception_ptr failure;
  const auto work = [&] {
    for (std::size_t i = next++; i < paths.size(); i = next++) {
      try {
        hashes[i] = hash_of(paths[i]);
      } catch (...) {
        const std::lock_guard lock(failure_mutex);
        failure = std::current_exception();
      }
    }
  };
  {
    const std::size_t cores = std::max(1U, std::thread::hardware_concurrency());
    std::vector<std::jthread> threads;
    for (std::size_t i = 1; i < std::min(cores, paths.size()); ++i) threads.emplace_back(work);
    work();
  }
  if (failure) std::rethrow_exception(failure);
  return hashes;
}

}  // namespace rondel::app
