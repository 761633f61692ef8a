#include <fmt/core.h>

#include <algorithm>
#include <cmath>
#include <cstdlib>
#include <numbers>
#include <vector>

#include "tests/vision/rim/rim_trials.h"
#include "vision/rim/find_rim.h"

// Centre of the rim from single frames of rigs drawn at random, and with 40 % of the rim hidden.
//   bench_rim_bench [rigs]

namespace {

using namespace rondel;

struct Tally {
  std::vector<double> errors;
  double squares = 0.0;
  int missed = 0;

  void add(const std::optional<vision::Rim>& rim, const scene::ImagedRim& truth) {
    if (!rim) {
      ++missed;
      return;
    }
    const double du = rim->centre.at.u_px - truth.centre.u_px;
    const double dv = rim->centre.at.v_px - truth.centre.v_px;
    errors.push_back(std::hypot(du, dv));
    squares += 0.5 * (du * du / rim->centre.cov_px2[0] + dv * dv / rim->centre.cov_px2[2]);
  }
  void print(const char* name) {
    if (errors.empty()) return;
    std::sort(errors.begin(), errors.end());
    fmt::print("{:<18}{:>6}{:>8}{:>10.3f}{:>10.3f}{:>10.3f}{:>12.2f}\n",
               name,
               errors.size(),
               missed,
               errors[errors.size() / 2],
               errors[errors.size() * 9 / 10],
               errors.back(),
               std::sqrt(squares / static_cast<double>(errors.size())));
  }
};

}  // namespace

int main(int argc, char** argv) {
  const unsigned rigs = argc > 1 ? static_cast<unsigned>(std::atoi(argv[1])) : 64;
  constexpr auto kKinds = static_cast<unsigned>(trials::Trouble::count);
  std::vector<Tally> by_trouble(kKinds);
  Tally all;
  Tally hidden;
  for (unsigned index = 0; index < rigs; ++index) {
    const trials::Trial trial = trials::make_trial(index, 1);
    scene::RenderedFrame frame = trials::render_trial(trial, 0, 2);
    const auto rim = vision::find_rim(frame.bgr);
    all.add(rim, frame.truth.rim);
    by_trouble[index % kKinds].add(rim, frame.truth.rim);
    trials::hide_rim(frame.bgr, frame.truth.rim, 0.4, 1.7 * index);
    hidden.add(vision::find_rim(frame.bgr), frame.truth.rim);
  }
  fmt::print("error of the centre, px            (reach: median 0.2, worst 0.5, rms/stated 1.5)\n");
  fmt::print("{:<18}{:>6}{:>8}{:>10}{:>10}{:>10}{:>12}\n",
             "frames",
             "found",
             "missed",
             "median",
             "90 %",
             "worst",
             "rms/stated");
  for (unsigned k = 0; k < kKinds; ++k) by_trouble[k].print(trials::kTroubleNames[k]);
  all.print("all");
  hidden.print("40 % hidden");
}
