#include "calib/colour/choose.h"

#include <fmt/core.h>

#include <algorithm>
#include <array>
#include <atomic>
#include <cmath>
#include <thread>

namespace rondel::colour {
namespace {

constexpr double kEnvelopeSlack = 10.0;

/// Runs work(0) .. work(count - 1) on all cores.
template <class Work>
void in_parallel(std::size_t count, const Work& work) {
  std::atomic<std::size_t> next = 0;
  const auto run = [&] {
    for (std::size_t k = next++; k < count; k = next++) work(k);
  };
  std::vector<std::thread> helpers;
  const std::size_t threads = std::clamp(std::thread::hardware_concurrency(), 1U, 16U);
  for (std::size_t t = 1; t < std::min(threads, count); ++t) helpers.emplace_back(run);
  run();
  for (std::thread& helper : helpers) helper.join();
}

std::uint64_t most_of(double share, std::uint64_t total) {
  return static_cast<std::uint64_t>(share * static_cast<double>(total));
}

std::string name_of(const std::string& light) { return light.empty() ? "unnamed" : light; }

/// Colours of one light that are looked at for the envelope and for collisions.
constexpr std::size_t kThinned = 100'000;

/// `problem` without what `box` has already: its wanted pixels count as found, its unwanted ones
/// are taken from the caps.
BoxProblem beside(const BoxProblem& problem, const HsvBox& box) {
  BoxProblem rest;
  for (const Wanted& wanted : problem.wanted) {
    Wanted left{{}, wanted.already};
    for (const HsvCounts::Entry& entry : wanted.pixels.entries) {
      if (box.contains(entry.colour)) {
        left.already += entry.count;
      } else {
        left.pixels.entries.push_back(entry);
      }
    }
    rest.wanted.push_back(std::move(left));
  }
  for (const Unwanted& unwanted : problem.unwanted) {
    Unwanted left{{}, unwanted.most};
    std::uint64_t inside = 0;
    for (const HsvCounts::Entry& entry : unwanted.pixels.entries) {
      if (box.contains(entry.colour)) {
        inside += entry.count;
      } else {
        left.pixels.entries.push_back(entry);
      }
    }
    left.most = inside < unwanted.most ? unwanted.most - inside : 0;
    rest.unwanted.push_back(std::move(left));
  }
  return rest;
}

double score_of(const BoxProblem& problem, const std::vector<HsvBox>& boxes) {
  double worst = 1.0;
  const ThresholdSet set{"", boxes};
  for (const Wanted& wanted : problem.wanted) {
    if (wanted.total() == 0) continue;
    worst = std::min(worst,
                     static_cast<double>(count_in(wanted.pixels, set) + wanted.already) /
                         static_cast<double>(wanted.total()));
  }
  return worst;
}

/// The level along an axis (0 h, 1 s, 2 v) that halves the wanted pixels.
int median_level(const BoxProblem& problem, int axis) {
  std::array<std::uint64_t, 256> counts{};
  std::uint64_t total = 0;
  for (const Wanted& wanted : problem.wanted) {
    for (const HsvCounts::Entry& entry : wanted.pixels.entries) {
      const Hsv p = entry.colour;
      counts[axis == 0 ? p.h : (axis == 1 ? p.s : p.v)] += entry.count;
      total += entry.count;
    }
  }
  std::uint64_t sum = 0;
  for (int level = 0; level < 256; ++level) {
    sum += counts[static_cast<std::size_t>(level)];
    if (2 * sum >= total) return level;
  }
  return 255;
}

struct PairFound {
  std::vector<HsvBox> boxes;
  double score = 0.0;
  double bound = 1.0;
  double gap = 1.0;
};

/// Two boxes, each the best beside the other: from several halves of the pixels, one box after the
/// other until neither can be bettered.
PairFound find_pair(const BoxProblem& problem,
                    const BoxSearchOptions& search,
                    const HsvBox& one_box) {
  PairFound best;
  const auto improve = [&](HsvBox first) {
    PairFound pair;
    std::array<std::optional<HsvBox>, 2> boxes{first, std::nullopt};
    std::size_t turn = 1;
    for (int round = 0; round < 6; ++round, turn = 1 - turn) {
      const BoxProblem rest = beside(problem, *boxes[1 - turn]);
      const BoxFound found = find_box(rest, search);
      if (!found.box) break;
      const bool better = found.score > pair.score + 1e-9;
      if (!better && boxes[turn]) {
        pair.bound = found.bound;
        pair.gap = found.gap();
        break;
      }
      boxes[turn] = refine(rest, *found.box, search.grid);
      pair.boxes = {*boxes[1 - turn], *boxes[turn]};
      pair.score = score_of(problem, pair.boxes);
      pair.bound = std::max(found.bound, pair.score);
      pair.gap = found.gap();
    }
    if (pair.score > best.score) best = pair;
  };
  improve(one_box);
  for (int axis = 1; axis < 3; ++axis) {
    const int middle = median_level(problem, axis);
    BoxProblem half = problem;
    for (Wanted& wanted : half.wanted) {
      std::erase_if(wanted.pixels.entries, [&](const HsvCounts::Entry& entry) {
        const Hsv p = entry.colour;
        return (axis == 0 ? p.h : (axis == 1 ? p.s : p.v)) > middle;
      });
    }
    for (Unwanted& unwanted : half.unwanted) unwanted.most /= 2;
    const BoxFound first = find_box(half, search);
    if (first.box) improve(*first.box);
  }
  return best;
}

class Chooser {
 public:
  Chooser(const std::vector<LightSamples>& samples,
          const std::vector<std::string>& objects,
          const ChooseOptions& options)
      : samples_{samples}, objects_{objects}, options_{options} {
    for (const LightSamples& light : samples) {
      for (const LightChange& change : options.changes) {
        shifts_.emplace_back(change, options.rgb565, light.noise);
      }
      thinned_.push_back(thinned(light.surroundings, kThinned));
    }
    for (std::size_t c = 0; c < shifts_.size(); ++c) all_.push_back(c);
    pixels_.resize(objects.size());
    in_parallel(objects.size(), [&](std::size_t o) {
      for (const std::size_t c : all_) {
        pixels_[o].push_back(shifted(samples_[light_of(c)].objects[o], shifts_[c]));
      }
    });
    problem_parts_ = parts_of(all_);
  }

  [[nodiscard]] ChosenSet choose(std::size_t o) const {
    ChosenSet chosen;
    chosen.set.object = objects_[o];
    const BoxProblem problem = problem_of(o, all_, problem_parts_);
    if (std::all_of(problem.wanted.begin(), problem.wanted.end(), [](const Wanted& w) {
          return w.total() == 0;
        })) {
      return chosen;
    }
    const BoxFound found = find_box(problem, options_.search);
    chosen.bound = found.bound;
    chosen.gap = found.gap();
    if (found.box) {
      chosen.set.boxes = {refine(problem, *found.box, options_.search.grid)};
      chosen.one_box_score = score_of(problem, chosen.set.boxes);
      if (chosen.one_box_score < options_.recall) {
        PairFound pair = find_pair(problem, options_.search, chosen.set.boxes[0]);
        // A second box has to earn its place on the board.
        if (pair.score > chosen.one_box_score + 0.005) {
          chosen.set.boxes = std::move(pair.boxes);
          chosen.bound = pair.bound;
          chosen.gap = pair.gap;
        }
      }
    }
    judge(o, problem, chosen);
    chosen.bound = std::max(chosen.bound, chosen.score);
    const bool failing = chosen.score < options_.recall;
    if (failing) chosen.collisions = collisions_of(o, chosen);
    if ((failing || options_.per_light) && samples_.size() > 1) chosen.per_light = per_light(o);
    if (failing) chosen.advice = advice_for(o, chosen);
    return chosen;
  }

 private:
  /// A condition is a light under a change; conditions of one light are neighbours.
  [[nodiscard]] std::size_t light_of(std::size_t condition) const {
    return condition / options_.changes.size();
  }
  [[nodiscard]] const LightChange& change_of(std::size_t condition) const {
    return options_.changes[condition % options_.changes.size()];
  }

  /// What is unwanted under some conditions: surroundings first, then each object's own pixels.
  [[nodiscard]] std::vector<HsvCounts> parts_of(const std::vector<std::size_t>& conditions) const {
    HsvCounter counter;
    std::vector<HsvCounts> parts;
    for (const std::size_t c : conditions) {
      counter.add(samples_[light_of(c)].surroundings, shifts_[c]);
    }
    parts.push_back(counter.take());
    for (const std::vector<HsvCounts>& object : pixels_) {
      for (const std::size_t c : conditions) counter.add(object[c]);
      parts.push_back(counter.take());
    }
    return parts;
  }

  [[nodiscard]] BoxProblem problem_of(std::size_t o,
                                      const std::vector<std::size_t>& conditions,
                                      const std::vector<HsvCounts>& parts) const {
    BoxProblem problem;
    for (const std::size_t c : conditions) problem.wanted.push_back({pixels_[o][c], 0});
    problem.unwanted.push_back({parts[0], most_of(options_.false_positive_cap, parts[0].total())});
    for (std::size_t other = 0; other < objects_.size(); ++other) {
      const HsvCounts& pixels = parts[other + 1];
      if (other == o || pixels.entries.empty()) continue;
      problem.unwanted.push_back({pixels, most_of(options_.overlap_cap, pixels.total())});
    }
    return problem;
  }

  /// The best single box under some conditions only.
  [[nodiscard]] std::pair<std::vector<HsvBox>, double> one_box(
      std::size_t o, const std::vector<std::size_t>& conditions) const {
    const BoxProblem problem = problem_of(o, conditions, parts_of(conditions));
    const BoxFound found = find_box(problem, options_.search);
    if (!found.box) return {{}, 0.0};
    std::vector<HsvBox> boxes{refine(problem, *found.box, options_.search.grid)};
    const double score = score_of(problem, boxes);
    return {std::move(boxes), score};
  }

  [[nodiscard]] std::vector<LightSet> per_light(std::size_t o) const {
    std::vector<LightSet> sets;
    for (std::size_t l = 0; l < samples_.size(); ++l) {
      if (samples_[l].objects[o].entries.empty()) continue;
      std::vector<std::size_t> conditions;
      for (const std::size_t c : all_) {
        if (light_of(c) == l) conditions.push_back(c);
      }
      auto [boxes, score] = one_box(o, conditions);
      sets.push_back({samples_[l].light, {objects_[o], std::move(boxes)}, score});
    }
    return sets;
  }

  /// Under which conditions something else has the colours that the object loses where it is worst.
  [[nodiscard]] std::vector<Collision> collisions_of(std::size_t o, const ChosenSet& chosen) const {
    // Cells of 4 x 8 x 8 levels.
    const auto cell = [](Hsv p) {
      return (static_cast<std::size_t>(p.h / 4) * 32 + p.s / 8U) * 32 + p.v / 8U;
    };
    std::vector<char> lost(45 * 32 * 32, 0);
    std::size_t worst = 0;
    for (const std::size_t c : all_) {
      if (samples_[light_of(c)].light == chosen.worst_light &&
          text_of(change_of(c)) == chosen.worst_change) {
        worst = c;
      }
    }
    for (const HsvCounts::Entry& entry : pixels_[o][worst].entries) {
      if (!chosen.set.contains(entry.colour)) lost[cell(entry.colour)] = 1;
    }
    const auto share = [&](const HsvCounts& counts) {
      std::uint64_t inside = 0;
      for (const HsvCounts::Entry& entry : counts.entries) {
        if (lost[cell(entry.colour)] != 0) inside += entry.count;
      }
      const std::uint64_t total = counts.total();
      return total == 0 ? 0.0 : static_cast<double>(inside) / static_cast<double>(total);
    };
    std::vector<Collision> collisions;
    const auto consider = [&](const std::string& with, double cap, const auto& counts_under) {
      Collision most;
      for (const std::size_t c : all_) {
        const double here = share(counts_under(c));
        if (here <= most.share) continue;
        most = {chosen.worst_light,
                chosen.worst_change,
                with,
                samples_[light_of(c)].light,
                text_of(change_of(c)),
                here};
      }
      if (most.share > cap) collisions.push_back(std::move(most));
    };
    consider(kSurroundings, options_.false_positive_cap, [&](std::size_t c) {
      return shifted(thinned_[light_of(c)], shifts_[c]);
    });
    for (std::size_t other = 0; other < objects_.size(); ++other) {
      if (other == o) continue;
      consider(objects_[other], options_.overlap_cap, [&](std::size_t c) -> const HsvCounts& {
        return pixels_[other][c];
      });
    }
    std::sort(collisions.begin(), collisions.end(), [](const Collision& a, const Collision& b) {
      return a.share > b.share;
    });
    return collisions;
  }

  [[nodiscard]] std::vector<std::string> advice_for(std::size_t o, const ChosenSet& chosen) const {
    std::vector<std::string> advice;
    const auto try_without = [&](const char* what, const auto& changed) {
      std::vector<std::size_t> conditions;
      for (const std::size_t c : all_) {
        if (!changed(change_of(c))) conditions.push_back(c);
      }
      if (conditions.size() == all_.size()) return;
      const double score = one_box(o, conditions).second;
      if (score > chosen.score + 0.01) {
        advice.push_back(
            fmt::format("{}: one box then keeps {:.1f} % in the worst light", what, 100.0 * score));
      }
    };
    try_without("hold the exposure fixed",
                [](const LightChange& change) { return change.stops != 0.0; });
    try_without("set the white balance in each light", [](const LightChange& change) {
      return change.gains.red != 1.0 || change.gains.blue != 1.0;
    });
    if (chosen.set.boxes.size() == 1 && chosen.one_box_score < options_.recall) {
      advice.emplace_back("a second box does not help");
    }
    double worst = 2.0;
    for (const LightSet& light : chosen.per_light) worst = std::min(worst, light.score);
    if (!chosen.per_light.empty() && worst > chosen.score + 0.01) {
      advice.push_back(fmt::format(
          "carry a set per light, if the board can tell the lights apart: {:.1f} % in the worst",
          100.0 * worst));
    }
    return advice;
  }

  /// Fills in everything that is measured of the set as it stands.
  void judge(std::size_t o, const BoxProblem& problem, ChosenSet& chosen) const {
    chosen.score = 1.0;
    for (std::size_t l = 0; l < samples_.size(); ++l) {
      if (samples_[l].objects[o].entries.empty()) continue;
      double worst = 2.0;
      std::size_t worst_change = 0;
      for (std::size_t c = 0; c < options_.changes.size(); ++c) {
        const HsvCounts& counts = pixels_[o][l * options_.changes.size() + c];
        const double recall =
            static_cast<double>(count_in(counts, chosen.set)) / static_cast<double>(counts.total());
        if (c == 0) chosen.recall_as_captured.emplace_back(samples_[l].light, recall);
        if (recall < worst) {
          worst = recall;
          worst_change = c;
        }
      }
      chosen.recall_by_light.emplace_back(samples_[l].light, worst);
      if (worst < chosen.score || chosen.worst_light.empty()) {
        chosen.score = worst;
        chosen.worst_light = samples_[l].light;
        chosen.worst_change = text_of(options_.changes[worst_change]);
      }
    }
    const HsvCounts& surroundings = problem.unwanted.front().pixels;
    if (const std::uint64_t total = surroundings.total(); total > 0) {
      chosen.false_positive_rate =
          static_cast<double>(count_in(surroundings, chosen.set)) / static_cast<double>(total);
    }
    chosen.envelope = envelope_of(o, chosen.set);
  }

  /// The light that fails under a change, or nothing.
  [[nodiscard]] std::optional<std::string> failing(std::size_t o,
                                                   const ThresholdSet& set,
                                                   const LightChange& change) const {
    double inside = 0.0;
    double total = 0.0;
    double most = -1.0;
    std::string most_light;
    for (std::size_t l = 0; l < samples_.size(); ++l) {
      const LightSamples& light = samples_[l];
      const ColourShift shift(change, options_.rgb565, light.noise);
      if (!light.objects[o].entries.empty() &&
          share_in(light.objects[o], set, shift) < options_.recall) {
        return name_of(light.light);
      }
      const auto pixels = static_cast<double>(light.surroundings.total());
      const double here = share_in(thinned_[l], set, shift) * pixels;
      inside += here;
      total += pixels;
      if (here > most) {
        most = here;
        most_light = name_of(light.light);
      }
    }
    if (inside > kEnvelopeSlack * options_.false_positive_cap * total) {
      return most_light;
    }
    return std::nullopt;
  }

  [[nodiscard]] Envelope envelope_of(std::size_t o, const ThresholdSet& set) const {
    Envelope envelope;
    if (failing(o, set, {})) return envelope;
    envelope.stops = {0.0, 0.0};
    envelope.kelvin = {options_.middle_kelvin, options_.middle_kelvin};
    for (std::size_t side = 0; side < 2; ++side) {
      const double out = side == 0 ? -1.0 : 1.0;
      for (int k = 1; 0.1 * k <= std::abs(kEnvelopeStops[side]) + 1e-9; ++k) {
        const double stops = out * 0.1 * k;
        const auto broken = failing(o, set, {stops, 0.0, {}});
        if (broken) {
          envelope.broken_by[side] = *broken;
          break;
        }
        (*envelope.stops)[side] = stops;
      }
      // Steps of 5 in reciprocal megakelvin.
      const double middle = 1e6 / options_.middle_kelvin;
      const double end = 1e6 / kEnvelopeKelvin[side];
      const int steps = static_cast<int>(std::ceil(std::abs(end - middle) / 5.0));
      for (int k = 1; k <= steps; ++k) {
        const double kelvin = 1e6 / (middle + (end - middle) * k / steps);
        const auto broken = failing(o, set, change_of_light(0.0, options_.middle_kelvin, kelvin));
        if (broken) {
          envelope.broken_by[2 + side] = *broken;
          break;
        }
        (*envelope.kelvin)[side] = kelvin;
      }
    }
    return envelope;
  }

  const std::vector<LightSamples>& samples_;
  const std::vector<std::string>& objects_;
  const ChooseOptions& options_;
  std::vector<ColourShift> shifts_;             ///< [condition]
  std::vector<std::size_t> all_;                ///< all conditions
  std::vector<std::vector<HsvCounts>> pixels_;  ///< [object][condition]
  std::vector<HsvCounts> problem_parts_;        ///< of all conditions
  std::vector<RgbCounts> thinned_;              ///< [light], surroundings
};

}  // namespace

double share_in(const RgbCounts& pixels, const ThresholdSet& set, const ColourShift& shift) {
  std::uint64_t inside = 0;
  std::uint64_t total = 0;
  for (const RgbCounts::Entry& entry : pixels.entries) {
    total += entry.count;
    const std::uint32_t draws = shift.noisy() ? std::min(entry.count, kNoiseDraws) : 1;
    std::uint32_t left = entry.count;
    for (std::uint32_t draw = 0; draw < draws; ++draw) {
      const std::uint32_t share = left / (draws - draw);
      if (set.contains(to_hsv(shift(entry.colour, draw)))) inside += share;
      left -= share;
    }
  }
  return total == 0 ? 0.0 : static_cast<double>(inside) / static_cast<double>(total);
}

std::vector<ChosenSet> choose_sets(const std::vector<LightSamples>& samples,
                                   const std::vector<std::string>& objects,
                                   const ChooseOptions& options,
                                   Progress& progress) {
  const Chooser chooser(samples, objects, options);
  std::vector<ChosenSet> sets(objects.size());
  std::atomic<int> done = 0;
  in_parallel(objects.size(), [&](std::size_t o) {
    sets[o] = chooser.choose(o);
    progress.at("thresholds", ++done, static_cast<int>(objects.size()));
  });
  return sets;
}

}  // namespace rondel::colour
