#include <fmt/format.h>

#include <iterator>

#include "calib/base/problem.h"
#include "tools/rondel/place.h"

namespace rondel::app {

Outcome where_command(const Arguments& arguments, Progress& /*progress*/) {
  const bool streaming = arguments.has("--points");
  if (arguments.words.size() != (streaming ? 1U : 3U)) {
    throw InputError("rondel where", "takes a venue and RANGE_M BEARING_DEG, or --points FILE");
  }
  const double range_m = streaming ? 1.0 : number_word(arguments, 1, "RANGE_M");
  const double bearing_deg = streaming ? 0.0 : number_word(arguments, 2, "BEARING_DEG");
  if (!(range_m > 0.0)) throw InputError("RANGE_M", fmt::format("{} must be above 0", range_m));
  const PlaceContext context = place_context(arguments);
  if (const auto source = arguments.value("--points")) {
    stream_points(*source,
                  "range_m,bearing_deg",
                  "range_m,bearing_deg,u_px,v_px,visible",
                  [&](double to_m, double at_deg, std::string& out) {
                    const auto pixel = context.curve->pixel_of(
                        {to_m, wrap_angle(at_deg * kRadPerDeg)}, context.height_m);
                    if (!pixel) {
                      fmt::format_to(std::back_inserter(out), "{},{},,,0\n", to_m, at_deg);
                      return;
                    }
                    fmt::format_to(std::back_inserter(out),
                                   "{},{},{:.3f},{:.3f},{}\n",
                                   to_m,
                                   at_deg,
                                   pixel->u_px,
                                   pixel->v_px,
                                   context.visible(*pixel) ? 1 : 0);
                  });
    return {};
  }
  const auto pixel =
      context.curve->pixel_of({range_m, wrap_angle(bearing_deg * kRadPerDeg)}, context.height_m);
  Outcome outcome;
  outcome.document = {{"u_px", nullptr}, {"v_px", nullptr}, {"visible", false}};
  if (!pixel) {
    outcome.summary =
        fmt::format("{:.3f} m at {:.1f} deg is not in the mirror\n", range_m, bearing_deg);
    return outcome;
  }
  const bool visible = context.visible(*pixel);
  outcome.document = {{"u_px", pixel->u_px}, {"v_px", pixel->v_px}, {"visible", visible}};
  outcome.summary = fmt::format("{:.3f} m at {:.1f} deg: ({:.1f}, {:.1f}) px{}\n",
                                range_m,
                                bearing_deg,
                                pixel->u_px,
                                pixel->v_px,
                                visible ? "" : "; hidden by the mask");
  return outcome;
}

}  // namespace rondel::app
