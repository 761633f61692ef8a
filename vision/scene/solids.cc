#include "vision/scene/solids.h"

#include <algorithm>
#include <cmath>

namespace rondel::scene {

bool meet(const Ball& solid, Vec3 o, Vec3 d, Meeting& meeting) {
  const Vec3 v = o - solid.centre;
  const double b = dot(v, d);
  const double c = dot(v, v) - solid.radius * solid.radius;
  const double disc = b * b - c;
  if (disc < 0.0 || c < 0.0) return false;
  const double t = -b - std::sqrt(disc);
  if (t <= 0.0 || t >= meeting.t) return false;
  meeting.t = t;
  meeting.normal = (1.0 / solid.radius) * (v + t * d);
  meeting.face = 0;
  return true;
}

bool meet(const Can& solid, Vec3 o, Vec3 d, Meeting& meeting) {
  const Vec3 v = o - solid.foot;
  bool met = false;
  // Lid and base.
  if (d.z != 0.0) {
    const double z = d.z < 0.0 ? solid.height : 0.0;
    const double t = (z - v.z) / d.z;
    if (t > 0.0 && t < meeting.t) {
      const double x = v.x + t * d.x;
      const double y = v.y + t * d.y;
      if (x * x + y * y <= solid.radius * solid.radius) {
        meeting.t = t;
        meeting.normal = {0.0, 0.0, d.z < 0.0 ? 1.0 : -1.0};
        meeting.face = d.z < 0.0 ? 1 : 2;
        met = true;
      }
    }
  }
  const double a = d.x * d.x + d.y * d.y;
  if (a > 0.0) {
    const double b = v.x * d.x + v.y * d.y;
    const double c = v.x * v.x + v.y * v.y - solid.radius * solid.radius;
    const double disc = b * b - a * c;
    if (disc >= 0.0 && c >= 0.0) {
      const double t = (-b - std::sqrt(disc)) / a;
      const double z = v.z + t * d.z;
      if (t > 0.0 && t < meeting.t && z >= 0.0 && z <= solid.height) {
        meeting.t = t;
        meeting.normal = {(v.x + t * d.x) / solid.radius, (v.y + t * d.y) / solid.radius, 0.0};
        meeting.face = 0;
        met = true;
      }
    }
  }
  return met;
}

bool meet(const Block& solid, Vec3 o, Vec3 d, Meeting& meeting) {
  const Vec3 w = o - solid.foot;
  const double c = solid.cos_turn;
  const double s = solid.sin_turn;
  const double from[3] = {c * w.x + s * w.y, -s * w.x + c * w.y, w.z - 0.5 * solid.height};
  const double along[3] = {c * d.x + s * d.y, -s * d.x + c * d.y, d.z};
  const double half[3] = {solid.half_length, solid.half_width, 0.5 * solid.height};
  double enter = -std::numeric_limits<double>::infinity();
  double leave = std::numeric_limits<double>::infinity();
  int axis = 0;
  for (int k = 0; k < 3; ++k) {
    if (along[k] == 0.0) {
      if (std::abs(from[k]) > half[k]) return false;
      continue;
    }
    const double inverse = 1.0 / along[k];
    const double near = (-std::copysign(half[k], along[k]) - from[k]) * inverse;
    const double far = (std::copysign(half[k], along[k]) - from[k]) * inverse;
    if (near > enter) {
      enter = near;
      axis = k;
    }
    leave = std::min(leave, far);
  }
  if (enter > leave || enter <= 0.0 || enter >= meeting.t) return false;
  meeting.t = enter;
  const double sign = along[axis] > 0.0 ? -1.0 : 1.0;
  meeting.face = 1 + 2 * axis + (sign > 0.0 ? 1 : 0);
  if (axis == 0) {
    meeting.normal = {sign * c, sign * s, 0.0};
  } else if (axis == 1) {
    meeting.normal = {-sign * s, sign * c, 0.0};
  } else {
    meeting.normal = {0.0, 0.0, sign};
  }
  return true;
}

Ball around(const Ball& solid) { return solid; }

Ball around(const Can& solid) {
  return {solid.foot + Vec3{0.0, 0.0, 0.5 * solid.height},
          std::hypot(solid.radius, 0.5 * solid.height)};
}

Ball around(const Block& solid) {
  return {solid.foot + Vec3{0.0, 0.0, 0.5 * solid.height},
          std::hypot(solid.half_length, solid.half_width, 0.5 * solid.height)};
}

}  // namespace rondel::scene
