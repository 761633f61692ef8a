#pragma once

#include <cstdint>
#include <variant>
#include <vector>

#include "vision/scene/render.h"
#include "vision/scene/scene.h"
#include "vision/scene/solids.h"

namespace rondel::scene {

/// What a ray sees.
struct Sight {
  double t = 0.0;
  Vec3 at;      ///< in the hall
  Vec3 normal;  ///< unit, towards where the ray comes from
  PixelClass shows = PixelClass::wall;
  int surface = 0;  ///< tells surfaces apart: equal number and face, equal plane if it is flat
  int face = 0;     ///< 0: curved
  int solid = -1;   ///< index among the hall's solids, -1: floor, hall
};

/// One frame's hall with its light, ready to be looked at. Immutable; safe to share by threads.
class World {
 public:
  World(const Scene& scene, const SceneFrame& frame);

  /// What stands first in a ray's way (unit direction, hall frame); there is always something.
  [[nodiscard]] Sight look(Vec3 from, Vec3 towards) const;
  /// Bit i set: the ray would meet the named object with `Scene::objects` index i, were it alone.
  [[nodiscard]] std::uint64_t named_ahead(Vec3 from, Vec3 towards) const;

  /// Light arriving at a surface, lux in linear sRGB. `own_solid` casts no shadow on it; without
  /// `shadows` nothing does.
  [[nodiscard]] Vec3 irradiance(Vec3 at, Vec3 normal, int own_solid, bool shadows = true) const;
  /// Highlights of the lamps, seen along `towards`; 1 is white under the camera's exposure.
  [[nodiscard]] Vec3 highlight(Vec3 at, Vec3 normal, Vec3 towards, double gloss) const;
  /// Reflectance at a place, of what `sight` shows. `footprint_m`: size of the ray's patch there.
  [[nodiscard]] Vec3 albedo(const Sight& sight, double footprint_m) const;
  [[nodiscard]] double gloss(const Sight& sight) const;
  /// What a lamp or window itself sends, or 0; 1 is white under the camera's exposure.
  [[nodiscard]] Vec3 emission(Vec3 from, Vec3 towards, const Sight& sight) const;
  /// Scale from lux to the sensor's full scale for a white surface.
  [[nodiscard]] double exposure() const { return exposure_; }

  /// Scene::objects index of a solid, or -1.
  [[nodiscard]] int object_of(int solid) const {
    return solid < 0 ? -1 : solids_[static_cast<std::size_t>(solid)].object;
  }
  [[nodiscard]] const std::vector<SceneObject>& objects() const { return objects_; }
  [[nodiscard]] bool away(std::size_t object) const { return away_[object]; }
  [[nodiscard]] Vec3 mean_floor_light() const { return bounce_; }

 private:
  struct Thing {
    std::variant<Ball, Can, Block> shape;
    Ball bound;
    Material material;
    PixelClass shows = PixelClass::wall;
    int object = -1;
  };
  /// A lamp, or a piece of a window, as it lights things: E = intensity cos cos / d^2.
  struct Source {
    Vec3 at;
    Vec3 axis;
    Vec3 intensity;
    double radius = 0.0;
  };
  /// One straight piece of a lane, round at its ends.
  struct Stroke {
    FloorPoint at;
    double along_x = 1.0;
    double along_y = 0.0;
    double length_m = 0.0;
    double half_width_m = 0.0;
    Vec3 albedo;
    [[nodiscard]] bool covers(double x, double y) const;
  };
  struct Pane {
    Vec3 corner, across, normal;  ///< unit across
    double width = 0.0;
    double low = 0.0;
    double top = 0.0;
    Vec3 radiance;
  };
  struct Disc {
    Vec3 at;
    double radius = 0.0;
    Vec3 radiance;
  };

  [[nodiscard]] double lit(Vec3 at, const Source& source, int own_solid) const;
  [[nodiscard]] double open_sky(Vec3 at, Vec3 normal, int own_solid) const;
  [[nodiscard]] Vec3 floor_albedo(double x, double y, double footprint_m) const;

  const Scene& scene_;
  std::vector<SceneObject> objects_;  ///< where they stand in this frame
  std::vector<bool> away_;
  std::vector<Thing> solids_;
  std::vector<Stroke> strokes_;
  std::vector<Source> sources_;
  std::vector<Pane> panes_;
  std::vector<Disc> discs_;
  Can robot_;  ///< as it shades the floor
  Vec3 ambient_;
  Vec3 bounce_;
  double exposure_ = 1.0;
};

}  // namespace rondel::scene
