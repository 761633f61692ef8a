#include <fmt/format.h>

#include <cmath>

#include "calib/base/problem.h"
#include "calib/range/advice.h"
#include "tools/rondel/place.h"

namespace rondel::app {

Outcome advise_command(const Arguments& arguments, Progress& /*progress*/) {
  const Workspace workspace = open_workspace(arguments.words.at(0));
  const PlaceContext context = place_context(arguments);
  range::AdviceInput input;
  input.near_m = workspace.venue.link.near_m;
  input.far_m = workspace.venue.link.far_m;
  input.mark_px = workspace.venue.noise.mark_px;
  input.tape_m = workspace.venue.noise.tape_m;
  input.tolerance = workspace.venue.tolerance;
  input.visible = [&](ImagePoint at) { return context.visible(at); };
  input.count = arguments.whole_number("--count").value_or(1);
  if (input.count < 1 || input.count > 24) {
    throw InputError("--count", fmt::format("{} must be from 1 to 24", input.count));
  }
  if (arguments.value("--goal").value_or("worst") == "mean") input.goal = range::Goal::mean;
  if (const auto room = arguments.number("--room-m")) {
    if (!(*room > 0.0)) throw InputError("--room-m", fmt::format("{} must be above 0", *room));
    input.room_m = *room;
  }
  const range::Advice advice = range::advise(*context.curve, input);
  const char* which = input.goal == range::Goal::worst ? "largest" : "mean";

  Outcome outcome;
  nlohmann::ordered_json marks = nlohmann::ordered_json::array();
  outcome.summary = fmt::format(
      "The {} 95 % band from {:.2f} to {:.2f} m is +-{:.1f} % of range now; {:.1f} % is allowed\n",
      which,
      input.near_m,
      input.far_m,
      196.0 * advice.spread_now,
      196.0 * advice.allowed);
  for (const range::AdvisedMark& m : advice.marks) {
    marks.push_back({{"range_m", m.spot.range_m},
                     {"bearing_deg", m.spot.bearing_rad * kDegPerRad},
                     {"u_px", m.pixel.u_px},
                     {"v_px", m.pixel.v_px},
                     {"band95_relative_before", 1.96 * m.spread_before},
                     {"band95_relative_after", 1.96 * m.spread_after}});
    outcome.summary += fmt::format(
        "Measure at {:.2f} m, {:.0f} deg (near pixel {:.0f}, {:.0f}): +-{:.1f} % becomes +-{:.1f} "
        "%\n",
        m.spot.range_m,
        m.spot.bearing_rad * kDegPerRad,
        m.pixel.u_px,
        m.pixel.v_px,
        196.0 * m.spread_before,
        196.0 * m.spread_after);
  }
  outcome.summary += fmt::format("{}: {}\n", advice.enough ? "You can stop" : "Go on", advice.why);
  outcome.document = {{"goal", input.goal == range::Goal::worst ? "worst" : "mean"},
                      {"band95_relative_now", 1.96 * advice.spread_now},
                      {"band95_relative_allowed", 1.96 * advice.allowed},
                      {"enough", advice.enough},
                      {"why", advice.why},
                      {"marks", std::move(marks)}};
  return outcome;
}

}  // namespace rondel::app
