#include "vision/scene/body.h"

#include <algorithm>
#include <cmath>

namespace rondel::scene {

Body::Body(const Scene& scene, const Mirror& mirror, const Rotation& chassis_from_camera) {
  const Robot& robot = scene.robot;
  const double plate_z = -robot.plate_below_eye_m;
  const double floor_z = -scene.rig.eye_height_m;
  const auto add = [&](std::variant<Can, Block> shape, const Material& material, bool camera) {
    const Ball bound = std::visit([](const auto& s) { return around(s); }, shape);
    parts_.push_back({shape, bound, material, camera});
  };
  const double plate_base = plate_z - robot.plate_thickness_m;
  add(Can{{0.0, 0.0, plate_base}, robot.plate_radius_m, robot.plate_thickness_m},
      robot.plate,
      false);
  const double body_base = floor_z + 0.008;
  if (robot.body_radius_m > 0.0 && plate_base > body_base) {
    add(Can{{0.0, 0.0, body_base}, robot.body_radius_m, plate_base - body_base},
        robot.plate,
        false);
  }
  for (const RobotPart& part : robot.parts) {
    add(Block{{part.at.x_m, part.at.y_m, plate_z},
              0.5 * part.length_m,
              0.5 * part.width_m,
              part.height_m,
              std::cos(part.turn_rad),
              std::sin(part.turn_rad)},
        part.material,
        false);
  }
  const double half_board = 0.5 * robot.camera_board_m;
  lens_radius_ = robot.camera_radius_m;
  lens_z_ = -0.0008;
  const double board_z = -0.011;
  if (half_board > 0.0) {
    add(Block{{0.0, 0.0, board_z - 0.0016}, half_board, half_board, 0.0016, 1.0, 0.0},
        robot.board,
        true);
    // Its legs down to the plate, as one block.
    add(Block{{0.0, 0.0, plate_z},
              0.8 * half_board,
              0.8 * half_board,
              std::max(1e-4, board_z - 0.0016 - plate_z),
              1.0,
              0.0},
        robot.plate,
        true);
  }
  if (lens_radius_ > 0.0) {
    add(Can{{0.0, 0.0, board_z}, lens_radius_, lens_z_ - board_z}, robot.post, true);
  }
  posts_from_ = parts_.size();
  const double top = scene.rig.distance_m + mirror.rim_z_m() + 0.012;
  for (const Post& post : robot.posts) {
    add(Can{{post.distance_m * std::cos(post.bearing_rad),
             post.distance_m * std::sin(post.bearing_rad),
             plate_z},
            post.radius_m,
            top - plate_z},
        robot.post,
        false);
  }
  ring_middle_ = chassis_from_camera(mirror.to_camera({0.0, 0.0, mirror.rim_z_m()}));
  ring_normal_ = chassis_from_camera(mirror.turned_to_camera({0.0, 0.0, -1.0}));
  ring_inner_ = mirror.rim_radius_m();
  ring_outer_ = robot.holder_radius_m;
  ring_ = robot.holder;
}

bool Body::look(Vec3 from, Vec3 towards, Sight& sight) const {
  Meeting meeting;
  int found = -1;
  for (std::size_t k = 0; k < parts_.size(); ++k) {
    const Part& part = parts_[k];
    if (!may_touch(part.bound, from, towards)) continue;
    if (std::visit([&](const auto& shape) { return meet(shape, from, towards, meeting); },
                   part.shape)) {
      found = static_cast<int>(k);
    }
  }
  if (found < 0) return false;
  const Part& part = parts_[static_cast<std::size_t>(found)];
  sight = {meeting.t,
           from + meeting.t * towards,
           meeting.normal,
           part.material,
           part.camera,
           meeting.face != 0,
           8 * found + meeting.face};
  if (part.camera && lens_radius_ > 0.0 && meeting.normal.z > 0.5 &&
      std::abs(sight.at.z - lens_z_) < 1e-6) {
    // The front of the lens: glass, its bezel, and the barrel's edge.
    const double r = std::hypot(sight.at.x, sight.at.y) / lens_radius_;
    sight.flat = false;
    if (r < 0.48) {
      sight.material = {{0.002, 0.002, 0.004}, 0.6};
    } else if (r < 0.62) {
      sight.material = {{0.012, 0.012, 0.012}, 0.1};
    } else if (r < 0.68) {
      sight.material = {{0.25, 0.25, 0.25}, 0.6};
    } else {
      sight.material = {{0.018, 0.018, 0.018}, 0.2};
    }
  }
  return true;
}

bool Body::look_past_mirror(Vec3 towards, Sight& sight) const {
  Meeting meeting;
  bool found = false;
  for (std::size_t k = posts_from_; k < parts_.size(); ++k) {
    const Part& part = parts_[k];
    if (std::visit([&](const auto& shape) { return meet(shape, {}, towards, meeting); },
                   part.shape)) {
      found = true;
      sight.material = part.material;
      sight.part = 8 * static_cast<int>(k);
      sight.flat = false;
    }
  }
  const double slope = dot(towards, ring_normal_);
  if (ring_outer_ > ring_inner_ && slope != 0.0) {
    const double t = dot(ring_middle_, ring_normal_) / slope;
    if (t > 0.0 && t < meeting.t) {
      const Vec3 v = t * towards - ring_middle_;
      // The mirror itself was looked for before: inside the ring nothing is left but its seam.
      if (dot(v, v) <= ring_outer_ * ring_outer_) {
        found = true;
        meeting.t = t;
        meeting.normal = ring_normal_;
        sight.material = ring_;
        sight.part = -1;
        sight.flat = true;
      }
    }
  }
  if (!found) return false;
  sight.t = meeting.t;
  sight.at = meeting.t * towards;
  sight.normal = meeting.normal;
  sight.camera = false;
  return true;
}

}  // namespace rondel::scene
