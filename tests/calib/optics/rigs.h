#pragma once

#include <random>

#include "calib/optics/trace.h"

namespace rondel::optics::testing {

/// The rig that the README's `rig.yaml` example describes.
inline RigGeometry<double> example_rig() {
  RigGeometry<double> rig;
  rig.focal_px = 260.0;
  rig.cu_px = 159.5;
  rig.cv_px = 119.5;
  rig.distance_m = 0.060;
  rig.mirror.vertex_radius_m = 0.040;
  rig.mirror.conic_constant = -2.25;
  rig.eye_height_m = 0.160;
  return rig;
}

/// The example with everything off by amounts that real builds show, times `size`.
inline RigGeometry<double> crooked_rig(std::mt19937& random, double size) {
  std::normal_distribution<double> normal;
  RigGeometry<double> rig = example_rig();
  rig.focal_px *= 1.0 + 0.02 * size * normal(random);
  rig.cu_px += 8.0 * size * normal(random);
  rig.cv_px += 8.0 * size * normal(random);
  rig.distance_m += 0.001 * size * normal(random);
  rig.mirror.vertex_radius_m *= 1.0 + 0.02 * size * normal(random);
  rig.mirror.conic_constant += 0.08 * size * normal(random);
  rig.eye_height_m += 0.003 * size * normal(random);
  rig.tilt_x = 0.0087 * size * normal(random);
  rig.tilt_y = 0.0087 * size * normal(random);
  rig.shift_x_m = 0.0003 * size * normal(random);
  rig.shift_y_m = 0.0003 * size * normal(random);
  rig.floor_tilt_x = 0.0052 * size * normal(random);
  rig.floor_tilt_y = 0.0052 * size * normal(random);
  rig.heading_rad = 3.0 * normal(random);
  rig.mirrored = normal(random) > 0.0;
  return rig;
}

}  // namespace rondel::optics::testing
