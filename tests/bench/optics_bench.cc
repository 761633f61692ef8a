// What one trace costs, each way, with and without derivatives.
#include <benchmark/benchmark.h>
#include <ceres/jet.h>

#include <vector>

#include "calib/optics/trace.h"
#include "tests/calib/optics/rigs.h"

namespace rondel::optics {
namespace {

RigGeometry<double> rig_for_bench() {
  std::mt19937 random(1);
  return testing::crooked_rig(random, 1.0);
}

void pixel_to_floor_plain(benchmark::State& state) {
  const RigGeometry<double> rig = rig_for_bench();
  double u = rig.cu_px + 40.0;
  for (auto step : state) {
    u = u > rig.cu_px + 100.0 ? rig.cu_px + 40.0 : u + 0.37;
    benchmark::DoNotOptimize(pixel_to_floor(rig, u, rig.cv_px + 20.0, 0.0));
  }
}
BENCHMARK(pixel_to_floor_plain);

void floor_to_pixel_plain(benchmark::State& state) {
  const RigGeometry<double> rig = rig_for_bench();
  double x = 0.3;
  for (auto step : state) {
    x = x > 2.5 ? 0.3 : x + 0.01;
    benchmark::DoNotOptimize(floor_to_pixel(rig, x, 0.4, 0.0));
  }
}
BENCHMARK(floor_to_pixel_plain);

void pixel_to_floor_with_derivatives(benchmark::State& state) {
  using Jet = ceres::Jet<double, 14>;
  const RigGeometry<Jet> rig = rig_for_bench().in<Jet>();
  for (auto step : state) {
    benchmark::DoNotOptimize(
        pixel_to_floor(rig, rig.cu_px + Jet(60.0), rig.cv_px + Jet(20.0), Jet(0.0)));
  }
}
BENCHMARK(pixel_to_floor_with_derivatives);

void floor_to_pixel_with_derivatives(benchmark::State& state) {
  using Jet = ceres::Jet<double, 14>;
  const RigGeometry<Jet> rig = rig_for_bench().in<Jet>();
  for (auto step : state) {
    benchmark::DoNotOptimize(floor_to_pixel(rig, Jet(1.0), Jet(0.4), Jet(0.0)));
  }
}
BENCHMARK(floor_to_pixel_with_derivatives);

}  // namespace
}  // namespace rondel::optics

BENCHMARK_MAIN();
