#pragma once

#include <filesystem>
#include <map>
#include <mutex>
#include <span>
#include <string>
#include <vector>

namespace rondel::app {

/// SHA-256 of files, remembered for as long as a file's size and time of change stay the same. May
/// be used from several threads.
class HashStore {
 public:
  /// 64 hex digits, or "absent" where there is no such file.
  [[nodiscard]] std::string hash_of(const std::filesystem::path& path);

  /// Hashes many files on all cores.
  [[nodiscard]] std::vector<std::string> hashes_of(std::span<const std::filesystem::path> paths);

 private:
  struct Entry {
    std::uintmax_t bytes = 0;
    std::filesystem::file_time_type changed;
    std::string hash;
  };
  std::mutex mutex_;
  std::map<std::filesystem::path, Entry> entries_;
};

}  // namespace rondel::app
