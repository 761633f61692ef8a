// Prints the range step's figures over rigs drawn within drawing tolerance. `bench_range_bench N`
// draws N rigs of each family.
#include <fmt/format.h>

#include <chrono>
#include <cstdlib>
#include <mutex>

#include "calib/range/advice.h"
#include "tests/calib/range/rig_study.h"

namespace {

using namespace rondel;
using namespace rondel::range;
using namespace rondel::range::study;

struct Tally {
  Score score;
  double bound = 0.0;
  double worst = 0.0;
  int rigs = 0;
  int failed = 0;
};

/// `model` empty: the program's own choice.
Tally study_fits(Family family,
                 int rigs,
                 int marks,
                 const Noise& noise,
                 const std::string& model,
                 bool drawn = true) {
  Tally tally;
  std::mutex mutex;
  on_all_cores(rigs, [&](int i) {
    std::mt19937 random(static_cast<unsigned>(1000 * marks + i));
    const auto rig = draw_rig(family, random);
    FitInput input = observe(rig, plan(marks), noise, random);
    input.only_model = model;
    if (!drawn) {
      input.rig.mirror.reset();
      input.rig.camera.focal_px.reset();
      input.rig.mounting.eye_height_m.reset();
    }
    const double bound = bound_square(family, rig, plan(marks), noise);
    try {
      const FitResult fit = fit_range(input);
      const Score s = score(*fit.curve, rig);
      const std::lock_guard lock(mutex);
      tally.score += s;
      tally.bound += bound;
      tally.worst = std::max(tally.worst, s.rms());
      ++tally.rigs;
    } catch (const std::exception&) {
      const std::lock_guard lock(mutex);
      ++tally.failed;
    }
  });
  tally.bound = std::sqrt(tally.bound / std::max(1, tally.rigs));
  return tally;
}

void print(const char* what, const Tally& t) {
  fmt::print(
      "{:46} {:6.2f} %  bound {:5.2f} %  ratio {:5.3f}  coverage {:5.1f} %  worst rig {:5.1f} %  "
      "failed {}  lost {}\n",
      what,
      100.0 * t.score.rms(),
      100.0 * t.bound,
      t.score.rms() / t.bound,
      100.0 * t.score.coverage(),
      100.0 * t.worst,
      t.failed,
      t.score.lost);
  std::fflush(stdout);
}

void outliers(int rigs) {
  int flagged = 0;
  int clean = 0;
  int clean_flagged = 0;
  int hits = 0;
  std::mutex mutex;
  on_all_cores(rigs, [&](int i) {
    std::mt19937 random(static_cast<unsigned>(77000 + i));
    const auto rig = draw_rig(Family::as_built, random);
    FitInput input = observe(rig, plan(10), {}, random);
    const auto bad = std::uniform_int_distribution<std::size_t>(0, input.marks.size() - 1)(random);
    const double angle = std::uniform_real_distribution<double>(0.0, 6.28)(random);
    // Eight standard deviations of the mark as it is seen in the image: pixel and tape together.
    input.marks[bad].pixel.u_px += 8.0 * 0.5 * std::cos(angle);
    input.marks[bad].pixel.v_px += 8.0 * 0.5 * std::sin(angle);
    const FitResult fit = fit_range(input);
    const std::lock_guard lock(mutex);
    ++hits;
    for (const MarkResidual& r : fit.residuals) {
      if (static_cast<std::size_t>(r.mark) == bad) {
        flagged += r.flagged ? 1 : 0;
      } else {
        ++clean;
        clean_flagged += r.flagged ? 1 : 0;
      }
    }
  });
  fmt::print("outlier of 8 sd among 10: flagged {:.1f} %, clean marks flagged {:.2f} %\n",
             100.0 * flagged / hits,
             100.0 * clean_flagged / clean);
}

void advice(int rigs) {
  Score plain;
  Score advised;
  std::mutex mutex;
  on_all_cores(rigs, [&](int i) {
    std::mt19937 random(static_cast<unsigned>(91000 + i));
    const auto rig = draw_rig(Family::as_built, random);
    FitInput bare = observe(rig, {}, {}, random);
    const FitResult first = fit_range(bare);
    AdviceInput ask;
    ask.near_m = 0.3;
    ask.far_m = 2.5;
    ask.count = 6;
    ask.goal = Goal::mean;
    std::vector<FloorSpot> spots;
    for (const AdvisedMark& m : advise(*first.curve, ask).marks) spots.push_back(m.spot);
    FitInput with = observe(rig, spots, {}, random);
    FitInput fixed = observe(rig, plan(6), {}, random);
    const Score a = score(*fit_range(with).curve, rig);
    const Score p = score(*fit_range(fixed).curve, rig);
    const std::lock_guard lock(mutex);
    advised += a;
    plain += p;
  });
  fmt::print("6 advised marks {:.2f} %, 6 fixed marks {:.2f} %, ratio {:.3f}\n",
             100.0 * advised.rms(),
             100.0 * plain.rms(),
             advised.rms() / plain.rms());
}

}  // namespace

int main(int argc, char** argv) {
  const int rigs = argc > 1 ? std::atoi(argv[1]) : 200;
  fmt::print("{} rigs of each family; standard error of an RMS about {:.0f} %\n",
             rigs,
             100.0 / std::sqrt(2.0 * rigs));
  for (const Family family : {Family::straight, Family::as_built}) {
    const char* name = family == Family::straight ? "straight" : "as built";
    const std::string model = family == Family::straight ? "drawing" : "";
    for (const int marks : {3, 6, 12, 20, 30}) {
      print(fmt::format("{}, {} marks", name, marks).c_str(),
            study_fits(family, rigs, marks, {}, model));
    }
    Score baseline;
    for (int i = 0; i < rigs; ++i) {
      std::mt19937 random(static_cast<unsigned>(30000 + i));
      const auto rig = draw_rig(family, random);
      baseline += polynomial_score(observe(rig, plan(30), {}, random), 4, rig);
    }
    fmt::print("{}, 4th-degree polynomial on 30 marks: {:.2f} %\n", name, 100.0 * baseline.rms());
  }
  print("as built, 20 marks by centroid (0.2 px)",
        study_fits(Family::as_built, rigs, 20, {0.2, 0.003, 0.2}, ""));
  print("as built, 12 marks, no drawing", study_fits(Family::as_built, rigs, 12, {}, "", false));
  print("  sphere+tilt", study_fits(Family::as_built, rigs, 12, {}, "sphere+tilt", false));
  print("  taylor3+tilt", study_fits(Family::as_built, rigs, 12, {}, "taylor3+tilt", false));
  outliers(2 * rigs);
  advice(rigs);

  std::mt19937 random(5);
  const auto rig = draw_rig(Family::as_built, random);
  FitInput input = observe(rig, plan(30), {}, random);
  const auto time_of = [&](const std::string& model) {
    input.only_model = model;
    const auto start = std::chrono::steady_clock::now();
    for (int i = 0; i < 5; ++i) (void)fit_range(input);
    return std::chrono::duration<double>(std::chrono::steady_clock::now() - start).count() / 5.0;
  };
  const double whole = time_of("");
  const double one = time_of("drawing+tilt");
  fmt::print("whole fit, 30 marks: {:.1f} ms; the chosen model alone {:.1f} ms; ratio {:.1f}\n",
             1e3 * whole,
             1e3 * one,
             whole / one);
  return 0;
}
