#include "tools/rondel/desk/serve.h"

#include <arpa/inet.h>
#include <fmt/format.h>
#include <ifaddrs.h>
#include <unistd.h>

#include <array>
#include <chrono>
#include <thread>

#include "calib/base/problem.h"
#include "tools/desk/door.h"
#include "tools/desk/guard.h"
#include "tools/rondel/desk/bench.h"
#include "tools/rondel/desk/routes.h"

namespace rondel::app {
namespace {

/// Under which names and addresses a request may come in.
std::vector<std::string> names_of(const std::string& host) {
  std::vector<std::string> names = {host};
  if (is_loopback(host)) {
    names.insert(names.end(), {"127.0.0.1", "localhost"});
    return names;
  }
  ifaddrs* list = nullptr;
  if (::getifaddrs(&list) == 0) {
    for (const ifaddrs* one = list; one != nullptr; one = one->ifa_next) {
      if (one->ifa_addr == nullptr || one->ifa_addr->sa_family != AF_INET) continue;
      std::array<char, INET_ADDRSTRLEN> text{};
      const auto* address = reinterpret_cast<const sockaddr_in*>(one->ifa_addr);
      ::inet_ntop(AF_INET, &address->sin_addr, text.data(), text.size());
      names.emplace_back(text.data());
    }
    ::freeifaddrs(list);
  }
  std::array<char, 256> machine{};
  if (::gethostname(machine.data(), machine.size() - 1) == 0) names.emplace_back(machine.data());
  return names;
}

/// An address that a browser elsewhere can use where the desk listens on all of them.
std::string shown_host(const std::string& host, const std::vector<std::string>& names) {
  if (host != "0.0.0.0") return host;
  for (const std::string& name : names) {
    if (name != host && !is_loopback(name)) return name;
  }
  return "127.0.0.1";
}

}  // namespace

bool is_loopback(const std::string& host) {
  return host == "localhost" || host.starts_with("127.");
}

void serve_desk(const std::filesystem::path& venue,
                const ServeOptions& options,
                const Progress& progress) {
  std::error_code error;
  if (!std::filesystem::is_regular_file(venue / "venue.yaml", error)) {
    throw InputError(venue.string(), "is no venue: it has no venue.yaml; 'rondel new' starts one");
  }
  desk::Events events;
  Bench bench(venue, events);
  desk::Work work(events);
  DeskParts parts{bench, events, work, is_loopback(options.host)};

  desk::Door door;
  const int port = door.open(options.host, options.port);
  desk::Guard guard;
  guard.token = desk::Guard::random_token();
  guard.cookie = fmt::format("rondel_{}", port);
  const std::vector<std::string> names = names_of(options.host);
  for (const std::string& name : names) {
    guard.hosts.push_back(fmt::format("{}:{}", name, port));
    if (port == 80) guard.hosts.push_back(name);
  }
  door.set_pre_routing_handler(
      [&guard](const httplib::Request& request, httplib::Response& response) {
        return guard.admits(request, response) ? httplib::Server::HandlerResponse::Unhandled
                                               : httplib::Server::HandlerResponse::Handled;
      });
  add_routes(door, parts);

  std::thread serving([&door] { door.serve(); });
  // Whatever changes the venue, this program or another, every page is told.
  std::thread watching([&] {
    std::string last = bench.stamp();
    while (!events.closed()) {
      std::this_thread::sleep_for(std::chrono::milliseconds(400));
      try {
        const std::string now = bench.stamp();
        if (now != last) events.send("changed", {{"stamp", now}});
        last = now;
      } catch (const std::exception&) {
        // A file that vanishes while it is looked at: the next look tells.
      }
    }
  });
  if (options.opened) {
    options.opened(
        fmt::format("http://{}:{}/?token={}", shown_host(options.host, names), port, guard.token));
  }
  while (!progress.cancelled()) std::this_thread::sleep_for(std::chrono::milliseconds(100));
  work.cancel();
  events.close();
  door.shut();
  serving.join();
  watching.join();
}

}  // namespace rondel::app
