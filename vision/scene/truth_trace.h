#pragma once

#include <optional>
#include <vector>

#include "calib/base/floor_map.h"
#include "calib/venue/centre_result.h"
#include "vision/scene/scene_rig.h"
#include "vision/scene/vec3.h"

namespace rondel::scene {

/// What light a pixel sees, in the camera frame.
struct ReflectedRay {
  Vec3 at;         ///< on the mirror, m
  Vec3 direction;  ///< unit, away from the mirror
};

/// The ray behind a pixel: none where the pixel's line misses the mirror inside its rim.
/// Intersects the mirror as an implicit quadric in its own frame.
[[nodiscard]] std::optional<ReflectedRay> reflected_ray(const SceneRig& rig, ImagePoint pixel);

/// The place `height_m` above the floor that a pixel shows in the robot frame, nothing in the way.
[[nodiscard]] std::optional<FloorSpot> floor_at(const SceneRig& rig,
                                                ImagePoint pixel,
                                                double height_m = 0.0);

/// Where a point in the robot frame (m) appears in the mirror: the root of the law of reflection
/// over the mirror's surface, found without tracing any pixel. To 1e-9 px. None where the point of
/// reflection lies outside the rim, or behind it.
[[nodiscard]] std::optional<ImagePoint> pixel_of_point(const SceneRig& rig, Vec3 in_robot);

/// The same for a spot `height_m` above the floor.
[[nodiscard]] std::optional<ImagePoint> pixel_of(const SceneRig& rig,
                                                 FloorSpot spot,
                                                 double height_m = 0.0);

/// Where a point in the camera frame appears directly, not by the mirror. Needs z > 0.
[[nodiscard]] ImagePoint project(const SceneRig& rig, Vec3 in_camera);

/// The rim as imaged: an exact ellipse, from the rim's circle put through the pinhole.
struct ImagedRim {
  ImagePoint centre;
  RimEllipse ellipse;
};
[[nodiscard]] ImagedRim imaged_rim(const SceneRig& rig);

/// Image radius about `centre` (towards `azimuth_rad`, from u's direction towards v's) of the rim.
[[nodiscard]] double rim_radius_px(const ImagedRim& rim, double azimuth_rad);

/// The image of the mirror's vertex: where a straight rig's axis is seen.
[[nodiscard]] ImagePoint imaged_vertex(const SceneRig& rig);

/// The true map as the interface that calibrated curves implement.
class TrueFloorMap : public FloorMap {
 public:
  explicit TrueFloorMap(const SceneRig& rig) : rig_{rig} {}
  [[nodiscard]] std::optional<FloorSpot> floor_at(ImagePoint at, double height_m) const override;
  [[nodiscard]] std::optional<ImagePoint> pixel_of(FloorSpot spot, double height_m) const override;
  [[nodiscard]] const SceneRig& rig() const { return rig_; }

 private:
  SceneRig rig_;
};

}  // namespace rondel::scene
