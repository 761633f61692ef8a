#include <fmt/format.h>

#include <iterator>

#include "calib/base/problem.h"
#include "tools/rondel/place.h"

namespace rondel::app {

Outcome at_command(const Arguments& arguments, Progress& /*progress*/) {
  const bool streaming = arguments.has("--points");
  if (arguments.words.size() != (streaming ? 1U : 3U)) {
    throw InputError("rondel at", "takes a venue and U_PX V_PX, or --points FILE");
  }
  const ImagePoint at =
      streaming ? ImagePoint{}
                : ImagePoint{number_word(arguments, 1, "U_PX"), number_word(arguments, 2, "V_PX")};
  const PlaceContext context = place_context(arguments);
  if (const auto source = arguments.value("--points")) {
    stream_points(*source,
                  "u_px,v_px",
                  "u_px,v_px,range_m,range_sd_m,band95_low_m,band95_high_m,bearing_deg,bearing_sd_"
                  "deg,visible",
                  [&](double u, double v, std::string& out) {
                    const auto e = context.curve->floor_with_band({u, v}, context.height_m);
                    if (!e) {
                      fmt::format_to(std::back_inserter(out), "{},{},,,,,,,0\n", u, v);
                      return;
                    }
                    fmt::format_to(std::back_inserter(out),
                                   "{},{},{:.4f},{:.4f},{:.4f},{:.4f},{:.3f},{:.3f},{}\n",
                                   u,
                                   v,
                                   e->spot.range_m,
                                   e->range_sd_m,
                                   e->band95_low_m,
                                   e->band95_high_m,
                                   e->spot.bearing_rad * kDegPerRad,
                                   e->bearing_sd_rad * kDegPerRad,
                                   context.visible({u, v}) ? 1 : 0);
                  });
    return {};
  }
  const auto e = context.curve->floor_with_band(at, context.height_m);
  Outcome outcome;
  outcome.document = {{"u_px", at.u_px},
                      {"v_px", at.v_px},
                      {"height_m", context.height_m},
                      {"range_m", nullptr},
                      {"range_sd_m", nullptr},
                      {"band95_m", nullptr},
                      {"bearing_deg", nullptr},
                      {"bearing_sd_deg", nullptr},
                      {"visible", false}};
  if (!e) {
    outcome.summary =
        fmt::format("({:.1f}, {:.1f}) px shows no floor: beyond the horizon or off the mirror\n",
                    at.u_px,
                    at.v_px);
    return outcome;
  }
  const bool visible = context.visible(at);
  outcome.document["range_m"] = e->spot.range_m;
  outcome.document["range_sd_m"] = e->range_sd_m;
  outcome.document["band95_m"] = {e->band95_low_m, e->band95_high_m};
  outcome.document["bearing_deg"] = e->spot.bearing_rad * kDegPerRad;
  outcome.document["bearing_sd_deg"] = e->bearing_sd_rad * kDegPerRad;
  outcome.document["visible"] = visible;
  outcome.summary = fmt::format(
      "({:.1f}, {:.1f}) px: range {:.3f} m (95 % band {:.3f} to {:.3f} m), bearing {:.1f} +- "
      "{:.1f} deg{}\n",
      at.u_px,
      at.v_px,
      e->spot.range_m,
      e->band95_low_m,
      e->band95_high_m,
      e->spot.bearing_rad * kDegPerRad,
      2.0 * e->bearing_sd_rad * kDegPerRad,
      visible ? "" : "; hidden by the mask");
  return outcome;
}

}  // namespace rondel::app
