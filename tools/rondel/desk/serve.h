#pragma once

#include <filesystem>
#include <functional>
#include <string>

#include "calib/base/progress.h"

namespace rondel::app {

struct ServeOptions {
  std::string host = "127.0.0.1";
  int port = 0;  ///< 0: any free one
  /// Told the address with its token once the desk answers there.
  std::function<void(const std::string& address)> opened;
};

/// Serves a venue's desk until `progress` is cancelled. InputError where the folder is no venue or
/// the address cannot be had.
void serve_desk(const std::filesystem::path& venue,
                const ServeOptions& options,
                const Progress& progress);

/// Whether only this machine can reach a host's address.
[[nodiscard]] bool is_loopback(const std::string& host);

}  // namespace rondel::app
