#pragma once

#include <variant>
#include <vector>

#include "vision/scene/mirror.h"
#include "vision/scene/scene.h"
#include "vision/scene/solids.h"

namespace rondel::scene {

/// The robot itself, in its chassis frame: origin in the pinhole, x forward, y left, z along the
/// camera's axis upwards.
class Body {
 public:
  struct Sight {
    double t = 0.0;
    Vec3 at;
    Vec3 normal;
    Material material;
    bool camera = false;  ///< the camera itself: what fills the mirror's hole
    bool flat = false;
    int part = 0;
  };

  Body(const Scene& scene, const Mirror& mirror, const Rotation& chassis_from_camera);

  /// The first part of the robot that a ray (chassis frame, unit direction) meets.
  [[nodiscard]] bool look(Vec3 from, Vec3 towards, Sight& sight) const;
  /// The same for lines of sight from the pinhole past the mirror: posts and holder only.
  [[nodiscard]] bool look_past_mirror(Vec3 towards, Sight& sight) const;

 private:
  struct Part {
    std::variant<Can, Block> shape;
    Ball bound;
    Material material;
    bool camera = false;
  };
  std::vector<Part> parts_;
  std::size_t posts_from_ = 0;
  double lens_radius_ = 0.0;
  double lens_z_ = 0.0;
  // The holder's ring, in the plane of the rim.
  Vec3 ring_middle_;
  Vec3 ring_normal_;
  double ring_inner_ = 0.0;
  double ring_outer_ = 0.0;
  Material ring_;
};

}  // namespace rondel::scene
