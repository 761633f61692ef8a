// How far thresholds carry: chosen in three lights, tried in thirteen others and in mixed light,
// against the best that the same exact search could do had it known them.
#include <fmt/format.h>

#include <chrono>
#include <cstdio>

#include "calib/colour/box_search.h"
#include "calib/colour/choose.h"
#include "tests/calib/colour/hall.h"

namespace rondel::colour {
namespace {

using testing::HallLight;
using testing::Shot;

double seconds_since(std::chrono::steady_clock::time_point start) {
  return std::chrono::duration<double>(std::chrono::steady_clock::now() - start).count();
}

/// Recall in the worst light, and false positives over all lights.
struct Outcome {
  double recall = 1.0;
  std::string worst;
  double false_positives = 0.0;
};

Outcome judge(const ThresholdSet& set,
              std::size_t object,
              const std::vector<LightSamples>& lights) {
  Outcome outcome;
  const ColourShift as_seen({}, true);
  double inside = 0.0;
  double total = 0.0;
  for (const LightSamples& light : lights) {
    const auto around = static_cast<double>(light.surroundings.total());
    inside += share_in(light.surroundings, set, as_seen) * around;
    total += around;
    if (light.objects[object].entries.empty()) continue;
    const double recall = share_in(light.objects[object], set, as_seen);
    if (recall >= outcome.recall) continue;
    outcome.recall = recall;
    outcome.worst = light.light;
  }
  outcome.false_positives = inside / total;
  return outcome;
}

/// 2nd to 98th percentile of one light's pixels, channel by channel; hue cut opposite its median.
ThresholdSet percentile_box(const RgbCounts& pixels) {
  std::vector<Hsv> all;
  for (const RgbCounts::Entry& entry : pixels.entries) {
    for (std::uint32_t k = 0; k < entry.count; ++k) all.push_back(to_hsv(entry.colour));
  }
  std::array<std::vector<int>, 3> levels;
  for (const Hsv p : all) levels[0].push_back(p.h);
  std::nth_element(levels[0].begin(),
                   levels[0].begin() + static_cast<std::ptrdiff_t>(all.size() / 2),
                   levels[0].end());
  const int middle = levels[0][all.size() / 2];
  levels[0].clear();
  for (const Hsv p : all) {
    levels[0].push_back((p.h - middle + 270) % 180);
    levels[1].push_back(p.s);
    levels[2].push_back(p.v);
  }
  std::array<std::array<int, 2>, 3> edges{};
  for (std::size_t c = 0; c < 3; ++c) {
    std::sort(levels[c].begin(), levels[c].end());
    const auto at = [&](double share) {
      return levels[c][static_cast<std::size_t>(share * static_cast<double>(all.size() - 1))];
    };
    edges[c] = {at(0.02), at(0.98)};
  }
  const auto back = [&](int h) { return (h + middle + 90) % 180; };
  return {"", {HsvBox{{back(edges[0][0]), back(edges[0][1])}, edges[1], edges[2]}}};
}

void run(const char* title, double balance, const LightingSpec& spec) {
  fmt::print("{}\n", title);
  const scene::Scene fit_scene = testing::hall_scene(3, 10, false);
  const scene::Scene test_scene = testing::hall_scene(8, 10, false);
  static const std::vector<Shot> fit_shots = testing::shoot(3, 10, false);
  static const std::vector<Shot> test_shots = testing::shoot(8, 10, false);
  static const std::vector<Shot> mixed_shots = testing::shoot(8, 10, true);
  std::vector<LightSamples> fit;
  std::uint64_t seed = 1;
  for (const HallLight& light : testing::lights_to_fit(balance)) {
    fit.push_back(testing::samples_of(fit_shots, fit_scene, light, seed++));
  }
  std::vector<LightSamples> unseen;
  for (const HallLight& light : testing::unseen_lights(balance)) {
    unseen.push_back(testing::samples_of(test_shots, test_scene, light, seed++));
  }
  HallLight mixed;
  mixed.name = "window and lamps";
  mixed.balance = 0.0;
  mixed.error_red = balance > 0.5 ? 0.83 : 1.0;
  mixed.error_blue = balance > 0.5 ? 1.35 : 1.0;
  unseen.push_back(testing::samples_of(mixed_shots, test_scene, mixed, seed++));

  for (std::size_t o = 0; o < testing::hall_objects().size(); ++o)
    fmt::print("  {} {} px to fit, {} unseen\n",
               testing::hall_objects()[o],
               fit[0].objects[o].total(),
               unseen[0].objects[o].total());
  for (const double cap : {1e-4, 1e-3}) {
    ChooseOptions options;
    options.changes = changes_of(spec);
    options.middle_kelvin = middle_kelvin(spec);
    options.false_positive_cap = cap;
    Progress quiet;
    const auto start = std::chrono::steady_clock::now();
    const auto chosen = choose_sets(fit, testing::hall_objects(), options, quiet);
    const double chosen_s = seconds_since(start);
    ChooseOptions all_known = options;
    all_known.changes = {LightChange{}};
    const auto ceiling = choose_sets(unseen, testing::hall_objects(), all_known, quiet);
    fmt::print("  cap {:.0e} of the surroundings, {} changes of light, searched in {:.2f} s\n",
               cap,
               options.changes.size(),
               chosen_s);
    fmt::print("  {:14} {:>7} {:>7} {:>7} {:>9} {:18} {:>8} {:>9} {:>8}\n",
               "object",
               "in fit",
               "gap",
               "unseen",
               "false",
               "worst light",
               "ceiling",
               "percent.",
               "false");
    for (std::size_t o = 0; o < chosen.size(); ++o) {
      const Outcome got = judge(chosen[o].set, o, unseen);
      const Outcome best = judge(ceiling[o].set, o, unseen);
      const Outcome by_hand = judge(percentile_box(fit[0].objects[o]), o, unseen);
      fmt::print("  {:14} {:7.4f} {:7.4f} {:7.4f} {:9.1e} {:18} {:8.4f} {:9.4f} {:8.1e}",
                 testing::hall_objects()[o],
                 chosen[o].score,
                 chosen[o].gap,
                 got.recall,
                 got.false_positives,
                 got.worst,
                 best.recall,
                 by_hand.recall,
                 by_hand.false_positives);
      for (const HsvBox& box : chosen[o].set.boxes)
        fmt::print("  h {}..{} s {}..{} v {}..{}",
                   box.h.from,
                   box.h.to,
                   box.s[0],
                   box.s[1],
                   box.v[0],
                   box.v[1]);
      fmt::print(" |");
      for (const HsvBox& box : ceiling[o].set.boxes)
        fmt::print("  h {}..{} s {}..{} v {}..{}",
                   box.h.from,
                   box.h.to,
                   box.s[0],
                   box.s[1],
                   box.v[0],
                   box.v[1]);
      fmt::print("\n");
    }
  }
}

}  // namespace
}  // namespace rondel::colour

int main() {
  using namespace rondel;
  LightingSpec with;
  with.auto_white_balance = true;
  with.stops = {-1.5, 1.5};
  colour::run("camera with white balance, off by up to 6 %", 1.0, with);
  LightingSpec without;
  without.stops = {-1.5, 1.5};
  without.kelvin = {2700.0, 7500.0};
  colour::run("camera held at one setting", 0.0, without);
}
