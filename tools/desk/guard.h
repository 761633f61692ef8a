#pragma once

#include <optional>
#include <string>
#include <vector>

#include "tools/desk/http.h"

namespace rondel::desk {

/// Who may come in: whoever shows the token once (in the first address) gets a cookie; requests
/// that name another Host, or come from another page's Origin, are refused whatever they carry.
struct Guard {
  std::string token;               ///< random, unguessable, new for every start
  std::vector<std::string> hosts;  ///< "127.0.0.1:PORT", "localhost:PORT", ...
  std::string cookie;              ///< its name: has the port in it, since cookies do not

  /// 128 random bits from the system, as hex.
  [[nodiscard]] static std::string random_token();

  /// Nothing when the request may pass; otherwise `response` is filled in.
  [[nodiscard]] bool admits(const httplib::Request& request, httplib::Response& response) const;
};

}  // namespace rondel::desk
