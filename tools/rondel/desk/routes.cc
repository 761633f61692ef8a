#include "tools/rondel/desk/routes.h"

#include <fmt/format.h>

#include <algorithm>
#include <atomic>
#include <chrono>
#include <cmath>
#include <memory>

#include "calib/base/problem.h"
#include "calib/venue/words.h"
#include "tools/desk/http.h"
#include "tools/desk/page.h"
#include "tools/rondel/report/assets/assets.h"

namespace rondel::app {
namespace {

using httplib::Request;
using httplib::Response;
using nlohmann::json;
using nlohmann::ordered_json;

/// A listener to events holds a thread; more than these wait until another leaves.
constexpr int kMostListeners = 8;
constexpr auto kListenFor = std::chrono::seconds(50);

constexpr const char* kPolicy =
    "default-src 'self'; img-src 'self' data: blob:; style-src 'self' 'unsafe-inline'; "
    "object-src 'none'; base-uri 'none'; form-action 'none'; frame-ancestors 'none'";
/// The report is one file with its script inside; it needs nothing else, and gets nothing else.
constexpr const char* kReportPolicy =
    "default-src 'none'; script-src 'unsafe-inline'; style-src 'unsafe-inline'; img-src data:; "
    "sandbox allow-scripts; frame-ancestors 'none'";

void harden(Response& response, const char* policy) {
  response.set_header("Content-Security-Policy", policy);
  response.set_header("X-Content-Type-Options", "nosniff");
  response.set_header("Referrer-Policy", "no-referrer");
  response.set_header("Cross-Origin-Resource-Policy", "same-origin");
  response.set_header("Cache-Control", "no-store");
}

void answer(Response& response, int status, const ordered_json& body) {
  response.status = status;
  response.set_content(body.dump(-1, ' ', false, ordered_json::error_handler_t::replace),
                       "application/json");
}

void refuse(Response& response, int status, const std::vector<std::string>& lines) {
  answer(response, status, {{"problems", lines}});
}

/// Turns whatever goes wrong into a status and the same one-line messages as the command line.
template <typename Handler>
httplib::Server::Handler guarded(const Handler& handler) {
  return [handler](const Request& request, Response& response) {
    harden(response, kPolicy);
    try {
      handler(request, response);
    } catch (const Refusal& refusal) {
      refuse(response, refusal.status(), {refusal.what()});
    } catch (const desk::Conflict& conflict) {
      refuse(response, 409, {conflict.what()});
    } catch (const InputError& error) {
      refuse(response, 422, lines_of(error));
    } catch (const json::exception& error) {
      refuse(response, 400, {fmt::format("not the JSON that was expected ({})", error.what())});
    } catch (const std::filesystem::filesystem_error& error) {
      refuse(
          response, 422, {fmt::format("{}: {}", error.path1().string(), error.code().message())});
    } catch (const std::exception& error) {
      refuse(response, 500, {fmt::format("a fault of Rondel's own: {}", error.what())});
    }
  };
}

json body_of(const Request& request) {
  json body = json::parse(request.body, nullptr, false);
  if (!body.is_object()) throw Refusal(400, "the request is no JSON object");
  return body;
}

double number_of(const Request& request, const char* key) {
  const auto number = parse_number(request.get_param_value(key));
  if (!number || std::abs(*number) > 1e6) {
    throw Refusal(400, fmt::format("{}: must be a number", key));
  }
  return *number;
}

/// A name that leads nowhere but downwards from where it is looked for.
std::string name_of(const Request& request, const char* key) {
  std::string name = request.get_param_value(key);
  const std::filesystem::path path(name);
  if (name.empty() || name.find('\0') != std::string::npos ||
      name.find('\\') != std::string::npos || path.is_absolute() ||
      std::find(path.begin(), path.end(), "..") != path.end()) {
    throw Refusal(400, fmt::format("{}: must be a name inside the venue", key));
  }
  return name;
}

/// Another folder of this machine, as somebody sitting at it may name it.
std::string folder_of(const DeskParts& parts, const std::string& folder) {
  if (!parts.this_machine_only) {
    throw Refusal(403, "other folders can be named only where the desk serves its own machine");
  }
  const std::filesystem::path path(folder);
  if (folder.empty() || folder.find('\0') != std::string::npos ||
      std::find(path.begin(), path.end(), "..") != path.end()) {
    throw Refusal(400, "the folder must be named without '..'");
  }
  return folder;
}

void send(Response& response, Picture picture) {
  response.set_content(std::move(picture.bytes), picture.type);
}

const char* type_of(std::string_view name) {
  if (name.ends_with(".css")) return "text/css; charset=utf-8";
  if (name.ends_with(".html")) return "text/html; charset=utf-8";
  return "text/javascript; charset=utf-8";
}

void add_page(httplib::Server& server) {
  for (const desk::PageFile& file : desk::page_files()) {
    const bool first = file.name == "index.html";
    server.Get(first ? "/" : fmt::format("/assets/{}", file.name),
               guarded([file](const Request&, Response& response) {
                 response.set_content(file.bytes.data(), file.bytes.size(), type_of(file.name));
               }));
  }
  server.Get("/assets/chart.js", guarded([](const Request&, Response& response) {
               const std::string_view chart = report::asset_chart_min_js();
               response.set_content(chart.data(), chart.size(), type_of("chart.js"));
             }));
}

void add_questions(httplib::Server& server, DeskParts& parts) {
  Bench& bench = parts.bench;
  server.Get("/api/bench", guarded([&parts](const Request&, Response& response) {
               ordered_json all = parts.bench.everything();
               all["running"] = parts.work.running();
               answer(response, 200, all);
             }));
  server.Get(
      "/api/place", guarded([&bench](const Request& request, Response& response) {
        const std::string object = request.get_param_value("object");
        if (request.has_param("u_px")) {
          answer(response,
                 200,
                 bench.place_of_pixel({number_of(request, "u_px"), number_of(request, "v_px")},
                                      object));
          return;
        }
        const double range_m = number_of(request, "range_m");
        if (!(range_m > 0.0)) throw Refusal(400, "range_m: must be above 0");
        answer(response,
               200,
               bench.pixel_of_place(
                   {range_m, wrap_angle(number_of(request, "bearing_deg") * kRadPerDeg)}, object));
      }));
  server.Get("/api/snap", guarded([&bench](const Request& request, Response& response) {
               answer(response,
                      200,
                      bench.snap(name_of(request, "image"),
                                 {number_of(request, "u_px"), number_of(request, "v_px")},
                                 request.get_param_value("object")));
             }));
  server.Get("/api/advise", guarded([&bench](const Request&, Response& response) {
               answer(response, 200, bench.advice());
             }));
  server.Get("/api/densities", guarded([&bench](const Request& request, Response& response) {
               answer(response, 200, bench.densities(request.get_param_value("object")));
             }));
  server.Get("/api/compare", guarded([&parts](const Request& request, Response& response) {
               answer(response,
                      200,
                      parts.bench.comparison(folder_of(parts, request.get_param_value("other"))));
             }));
  server.Post("/api/preview/range", guarded([&bench](const Request& request, Response& response) {
                answer(response, 200, bench.try_marks(body_of(request)));
              }));
  server.Post("/api/preview/colours", guarded([&bench](const Request& request, Response& response) {
                answer(response, 200, bench.try_boxes(body_of(request)));
              }));
  server.Post("/api/preview/tables", guarded([&bench](const Request& request, Response& response) {
                answer(response, 200, bench.try_link(body_of(request)));
              }));
  server.Post("/api/examine", guarded([&bench](const Request& request, Response& response) {
                answer(response, 200, bench.examine(body_of(request)));
              }));
}

void add_pictures(httplib::Server& server, Bench& bench) {
  server.Get("/api/frame", guarded([&bench](const Request& request, Response& response) {
               send(response, bench.frame(name_of(request, "image")));
             }));
  server.Get("/api/mask", guarded([&bench](const Request&, Response& response) {
               send(response, bench.mask());
             }));
  server.Get("/api/classes", guarded([&bench](const Request& request, Response& response) {
               send(response, bench.classes(name_of(request, "image"), request.has_param("over")));
             }));
  server.Get("/api/artefact", guarded([&bench](const Request& request, Response& response) {
               const std::string name = name_of(request, "name");
               send(response, bench.artefact(name));
               response.set_header("Content-Disposition",
                                   fmt::format("attachment; filename=\"{}\"", name));
             }));
  server.Get("/api/report", guarded([&bench](const Request&, Response& response) {
               send(response, bench.report());
               response.headers.erase("Content-Security-Policy");
               response.set_header("Content-Security-Policy", kReportPolicy);
             }));
}

void add_changes(httplib::Server& server, DeskParts& parts) {
  const auto done = [&parts](Response& response, const ordered_json& body) {
    parts.events.send("changed", {{"stamp", parts.bench.stamp()}});
    answer(response, 200, body);
  };
  server.Post("/api/edit", guarded([&parts, done](const Request& request, Response& response) {
                parts.bench.edit(body_of(request));
                done(response, {{"done", true}});
              }));
  server.Post("/api/undo", guarded([&parts, done](const Request&, Response& response) {
                done(response, {{"file", parts.bench.undo()}});
              }));
  server.Post("/api/redo", guarded([&parts, done](const Request&, Response& response) {
                done(response, {{"file", parts.bench.redo()}});
              }));
  server.Post("/api/link", guarded([&parts, done](const Request& request, Response& response) {
                parts.bench.write_link(body_of(request));
                done(response, {{"done", true}});
              }));
  server.Post("/api/frames", guarded([&parts, done](const Request& request, Response& response) {
                const std::string image = parts.bench.add_frame(
                    request.get_param_value("light"), name_of(request, "name"), request.body);
                done(response, {{"image", image}});
              }));
}

void add_work(httplib::Server& server, DeskParts& parts) {
  server.Post(
      "/api/run", guarded([&parts](const Request& request, Response& response) {
        const json body = body_of(request);
        const std::string step = body.value("step", "");
        std::string batch = body.value("batch", "");
        if (!batch.empty()) batch = folder_of(parts, batch);
        Bench& bench = parts.bench;
        const bool started = parts.work.start(step, [&bench, step, batch](Progress& progress) {
          return bench.run(step, batch, progress);
        });
        if (!started) {
          throw Refusal(
              409, fmt::format("'{}' is still running; wait or stop it", parts.work.running()));
        }
        answer(response, 202, {{"started", step}});
      }));
  server.Post("/api/cancel", guarded([&parts](const Request&, Response& response) {
                parts.work.cancel();
                answer(response, 200, {{"done", true}});
              }));
  auto listeners = std::make_shared<std::atomic<int>>(0);
  server.Get("/api/events",
             guarded([&parts, listeners](const Request& request, Response& response) {
               if (++*listeners > kMostListeners) {
                 --*listeners;
                 throw Refusal(503, "too many pages are open");
               }
               // A page that lost its connection goes on where it was.
               const auto seen = parse_whole(request.get_header_value("Last-Event-ID"));
               const std::int64_t now = parts.events.last();
               auto last = std::make_shared<std::int64_t>(seen && *seen <= now ? *seen : now);
               const auto until = std::chrono::steady_clock::now() + kListenFor;
               response.set_chunked_content_provider(
                   "text/event-stream",
                   [&parts, last, until](std::size_t, httplib::DataSink& sink) {
                     const auto event = parts.events.after(*last, std::chrono::seconds(5));
                     if (parts.events.closed() || std::chrono::steady_clock::now() > until) {
                       sink.done();
                       return true;
                     }
                     const std::string text = event ? fmt::format("id: {}\nevent: {}\ndata: {}\n\n",
                                                                  event->number,
                                                                  event->kind,
                                                                  event->data)
                                                    : std::string(": still here\n\n");
                     if (event) *last = event->number;
                     return sink.write(text.data(), text.size());
                   },
                   [listeners](bool) { --*listeners; });
             }));
}

}  // namespace

void add_routes(httplib::Server& server, DeskParts& parts) {
  add_page(server);
  add_questions(server, parts);
  add_pictures(server, parts.bench);
  add_changes(server, parts);
  add_work(server, parts);
}

}  // namespace rondel::app
