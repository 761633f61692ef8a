#pragma once

#include <limits>

#include "vision/scene/vec3.h"

namespace rondel::scene {

/// Where a ray first meets something.
struct Meeting {
  double t = std::numeric_limits<double>::infinity();  ///< along a unit direction, m
  Vec3 normal;                                         ///< unit, outward
  int face = 0;  ///< of flat-faced solids: tells their faces apart; 0 for curved ones
};

struct Ball {
  Vec3 centre;
  double radius = 0.0;
};
/// Upright.
struct Can {
  Vec3 foot;  ///< centre of the lower face
  double radius = 0.0;
  double height = 0.0;
};
/// Upright, turned about z.
struct Block {
  Vec3 foot;  ///< centre of the lower face
  double half_length = 0.0;
  double half_width = 0.0;
  double height = 0.0;
  double cos_turn = 1.0;
  double sin_turn = 0.0;
};

/// Meets `solid` nearer than `meeting.t`: replaces it and answers true. `d` is a unit vector.
/// Rays that start inside meet nothing.
bool meet(const Ball& solid, Vec3 o, Vec3 d, Meeting& meeting);
bool meet(const Can& solid, Vec3 o, Vec3 d, Meeting& meeting);
bool meet(const Block& solid, Vec3 o, Vec3 d, Meeting& meeting);

/// A ball around each.
[[nodiscard]] Ball around(const Ball& solid);
[[nodiscard]] Ball around(const Can& solid);
[[nodiscard]] Ball around(const Block& solid);

/// True where the ray may touch `ball` ahead of its origin.
[[nodiscard]] inline bool may_touch(const Ball& ball, Vec3 o, Vec3 d) {
  const Vec3 v = ball.centre - o;
  const double ahead = dot(v, d);
  const double reach2 = ball.radius * ball.radius;
  const double off2 = dot(v, v);
  return off2 - ahead * ahead <= reach2 && (ahead >= 0.0 || off2 <= reach2);
}

}  // namespace rondel::scene
