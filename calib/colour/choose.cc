#include "calib/colour/choose.h"

#include <algorithm>
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

/// All lights' surroundings under all changes, in one pot.
HsvCounts pooled_surroundings(const std::vector<LightSamples>& samples,
                              const std::vector<ColourShift>& shifts) {
  HsvCounter counter;
  for (const LightSamples& light : samples) {
    for (const ColourShift& shift : shifts) counter.add(light.surroundings, shift);
  }
  return counter.take();
}

std::uint64_t most_of(double share, std::uint64_t total) {
  return static_cast<std::uint64_t>(share * static_cast<double>(total));
}

class Chooser {
 public:
  Chooser(const std::vector<LightSamples>& samples,
          const std::vector<std::string>& objects,
          const ChooseOptions& options)
      : samples_{samples}, objects_{objects}, options_{options} {
    for (const LightChange& change : options.changes) shifts_.emplace_back(change, options.rgb565);
    surroundings_ = pooled_surroundings(samples, shifts_);
    pixels_.resize(objects.size());
    pooled_.resize(objects.size());
    in_parallel(objects.size(), [&](std::size_t o) {
      for (const LightSamples& light : samples) {
        for (const ColourShift& shift : shifts_) {
          pixels_[o].push_back(shifted(light.objects[o], shift));
        }
      }
      HsvCounter pooled;
      for (const LightSamples& light : samples) {
        for (const ColourShift& shift : shifts_) pooled.add(light.objects[o], shift);
      }
      pooled_[o] = pooled.take();
    });
  }

  [[nodiscard]] ChosenSet choose(std::size_t o) const {
    ChosenSet chosen;
    chosen.set.object = objects_[o];
    const BoxProblem problem = problem_of(o);
    if (std::all_of(problem.wanted.begin(), problem.wanted.end(), [](const Wanted& w) {
          return w.total() == 0;
        })) {
      return chosen;
    }
    const BoxFound found = find_box(problem, options_.search);
    chosen.bound = found.bound;
    chosen.gap = found.gap();
    if (found.box) chosen.set.boxes = {refine(problem, *found.box, options_.search.grid)};
    judge(o, chosen);
    chosen.bound = std::max(chosen.bound, chosen.score);
    return chosen;
  }

 private:
  [[nodiscard]] BoxProblem problem_of(std::size_t o) const {
    BoxProblem problem;
    for (const HsvCounts& counts : pixels_[o]) problem.wanted.push_back({counts, 0});
    problem.unwanted.push_back(
        {surroundings_, most_of(options_.false_positive_cap, surroundings_.total())});
    for (std::size_t other = 0; other < objects_.size(); ++other) {
      if (other == o || pooled_[other].entries.empty()) continue;
      problem.unwanted.push_back(
          {pooled_[other], most_of(options_.overlap_cap, pooled_[other].total())});
    }
    return problem;
  }

  /// Fills in everything that is measured of the set as it stands.
  void judge(std::size_t o, ChosenSet& chosen) const {
    chosen.score = 1.0;
    for (std::size_t l = 0; l < samples_.size(); ++l) {
      if (samples_[l].objects[o].entries.empty()) continue;
      double worst = 2.0;
      std::size_t worst_change = 0;
      for (std::size_t c = 0; c < shifts_.size(); ++c) {
        const HsvCounts& counts = pixels_[o][l * shifts_.size() + c];
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
    if (const std::uint64_t total = surroundings_.total(); total > 0) {
      chosen.false_positive_rate =
          static_cast<double>(count_in(surroundings_, chosen.set)) / static_cast<double>(total);
    }
    chosen.envelope = envelope_of(o, chosen.set);
  }

  /// The light that fails under a change, or nothing.
  [[nodiscard]] std::optional<std::string> failing(std::size_t o,
                                                   const ThresholdSet& set,
                                                   const LightChange& change) const {
    const ColourShift shift(change, options_.rgb565);
    double inside = 0.0;
    double total = 0.0;
    double most = -1.0;
    std::string most_light;
    for (const LightSamples& light : samples_) {
      if (!light.objects[o].entries.empty() &&
          share_in(light.objects[o], set, shift) < options_.recall) {
        return light.light.empty() ? "unnamed" : light.light;
      }
      const auto pixels = static_cast<double>(light.surroundings.total());
      const double here = share_in(light.surroundings, set, shift) * pixels;
      inside += here;
      total += pixels;
      if (here > most) {
        most = here;
        most_light = light.light;
      }
    }
    if (inside > kEnvelopeSlack * options_.false_positive_cap * total) {
      return most_light.empty() ? "unnamed" : most_light;
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
  std::vector<ColourShift> shifts_;
  HsvCounts surroundings_;
  std::vector<std::vector<HsvCounts>> pixels_;  ///< [object][light * changes + change]
  std::vector<HsvCounts> pooled_;               ///< [object]
};

}  // namespace

double share_in(const RgbCounts& pixels, const ThresholdSet& set, const ColourShift& shift) {
  std::uint64_t inside = 0;
  std::uint64_t total = 0;
  for (const RgbCounts::Entry& entry : pixels.entries) {
    total += entry.count;
    if (set.contains(to_hsv(shift(entry.colour)))) inside += entry.count;
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
