#include "tools/desk/guard.h"

#include <fmt/format.h>
#include <sys/random.h>

#include <algorithm>
#include <array>
#include <stdexcept>

namespace rondel::desk {
namespace {

/// Compares in a time that does not depend on where the first difference is.
bool same(std::string_view a, std::string_view b) {
  if (a.size() != b.size()) return false;
  unsigned difference = 0;
  for (std::size_t i = 0; i < a.size(); ++i) {
    difference |= static_cast<unsigned char>(a[i]) ^ static_cast<unsigned char>(b[i]);
  }
  return difference == 0;
}

std::string cookie_value(std::string_view header, std::string_view name) {
  while (!header.empty()) {
    const std::size_t end = std::min(header.find(';'), header.size());
    std::string_view pair = header.substr(0, end);
    header.remove_prefix(std::min(end + 1, header.size()));
    while (!pair.empty() && pair.front() == ' ') pair.remove_prefix(1);
    const std::size_t equals = pair.find('=');
    if (equals != std::string_view::npos && pair.substr(0, equals) == name) {
      return std::string(pair.substr(equals + 1));
    }
  }
  return {};
}

bool refuse(httplib::Response& response, int status, const std::string& why) {
  response.status = status;
  response.set_content(why + "\n", "text/plain; charset=utf-8");
  return false;
}

}  // namespace

std::string Guard::random_token() {
  std::array<unsigned char, 16> bytes{};
  if (::getrandom(bytes.data(), bytes.size(), 0) != static_cast<ssize_t>(bytes.size())) {
    throw std::runtime_error("the system gives no random bytes");
  }
  std::string hex;
  for (const unsigned char byte : bytes) hex += fmt::format("{:02x}", byte);
  return hex;
}

bool Guard::admits(const httplib::Request& request, httplib::Response& response) const {
  const std::string host = request.get_header_value("Host");
  if (std::find(hosts.begin(), hosts.end(), host) == hosts.end()) {
    return refuse(response, 421, "This desk does not answer to that host name.");
  }
  const std::string origin = request.get_header_value("Origin");
  if (!origin.empty() && origin != "http://" + host) {
    return refuse(response, 403, "Requests from other pages are refused.");
  }
  if (request.method == "GET" && request.path == "/" && request.has_param("token") &&
      same(request.get_param_value("token"), token)) {
    response.set_header("Set-Cookie",
                        fmt::format("{}={}; HttpOnly; SameSite=Strict; Path=/", cookie, token));
    response.set_redirect("/");
    return false;
  }
  if (same(cookie_value(request.get_header_value("Cookie"), cookie), token)) return true;
  return refuse(response,
                401,
                "This desk opens with the address that 'rondel desk' printed, token included.");
}

}  // namespace rondel::desk
