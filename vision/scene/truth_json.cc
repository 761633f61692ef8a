#include <fmt/format.h>

#include <cmath>
#include <nlohmann/json.hpp>

#include "vision/scene/render.h"

namespace rondel::scene {
namespace {

using Json = nlohmann::ordered_json;

/// Rounded to `digits` after the point: enough for a truth, and the same text everywhere.
double rounded(double value, int digits) {
  const double scale = std::pow(10.0, digits);
  return std::round(value * scale) / scale;
}

double degrees(double angle_rad) { return rounded(angle_rad * kDegPerRad, 5); }

Json rig_json(const SceneRig& rig) {
  Json mirror;
  if (rig.kind == MirrorKind::conic) {
    mirror["shape"] = "conic";
    mirror["vertex_radius_mm"] = rounded(1e3 * rig.vertex_radius_m, 6);
    mirror["conic_constant"] = rounded(rig.conic_constant, 8);
  } else {
    mirror["shape"] = "cone";
    mirror["slope_deg"] = degrees(rig.slope_rad);
  }
  mirror["rim_radius_mm"] = rounded(1e3 * rig.rim_radius_m, 6);
  mirror["distance_mm"] = rounded(1e3 * rig.distance_m, 6);
  mirror["tilt_x_deg"] = degrees(rig.tilt_x_rad);
  mirror["tilt_y_deg"] = degrees(rig.tilt_y_rad);
  mirror["shift_x_mm"] = rounded(1e3 * rig.shift_x_m, 6);
  mirror["shift_y_mm"] = rounded(1e3 * rig.shift_y_m, 6);
  Json out;
  out["width_px"] = rig.width_px;
  out["height_px"] = rig.height_px;
  out["focal_px"] = rounded(rig.focal_px, 6);
  out["principal_du_px"] = rounded(rig.principal_du_px, 6);
  out["principal_dv_px"] = rounded(rig.principal_dv_px, 6);
  out["mirror"] = mirror;
  out["mounting"] = {{"eye_height_mm", rounded(1e3 * rig.eye_height_m, 6)},
                     {"lean_x_deg", degrees(rig.lean_x_rad)},
                     {"lean_y_deg", degrees(rig.lean_y_rad)},
                     {"heading_deg", degrees(rig.heading_rad)},
                     {"mirrored", rig.mirrored}};
  return out;
}

Json object_json(const Scene& scene, const ObjectTruth& seen) {
  Json out;
  out["id"] = scene.objects[seen.object].id;
  out["object"] = seen.name;
  out["range_m"] = rounded(seen.spot.range_m, 6);
  out["bearing_deg"] = degrees(seen.spot.bearing_rad);
  out["height_m"] = rounded(seen.height_m, 6);
  out["middle_range_m"] = rounded(seen.middle.range_m, 6);
  if (seen.at) {
    out["u_px"] = rounded(seen.at->u_px, 5);
    out["v_px"] = rounded(seen.at->v_px, 5);
  }
  out["area_px"] = rounded(seen.area_px, 2);
  out["hidden_fraction"] = rounded(seen.hidden_fraction, 4);
  if (seen.centroid) {
    out["centroid_u_px"] = rounded(seen.centroid->u_px, 4);
    out["centroid_v_px"] = rounded(seen.centroid->v_px, 4);
    out["box_px"] = {seen.box_px.x, seen.box_px.y, seen.box_px.width, seen.box_px.height};
  }
  return out;
}

}  // namespace

std::string map_file(const std::string& image, std::string_view what) {
  return fmt::format("{}-{}.png", image.substr(0, image.rfind('.')), what);
}

std::string truth_json(const Scene& scene, const std::vector<FrameTruth>& frames) {
  const ImagedRim rim = imaged_rim(scene.rig);
  Json out;
  out["scene"] = scene.name;
  out["rig"] = rig_json(scene.rig);
  out["centre"] = {{"u_px", rounded(rim.centre.u_px, 5)}, {"v_px", rounded(rim.centre.v_px, 5)}};
  out["rim"] = {{"a_px", rounded(rim.ellipse.a_px, 5)},
                {"b_px", rounded(rim.ellipse.b_px, 5)},
                {"angle_deg", degrees(rim.ellipse.angle_rad)}};
  out["mask"] = "mask.png";
  out["class_values"] = {{"beyond", PixelClass::beyond},
                         {"hole", PixelClass::hole},
                         {"robot", PixelClass::robot},
                         {"floor", PixelClass::floor},
                         {"wall", PixelClass::wall},
                         {"object", PixelClass::object},
                         {"scenery", PixelClass::scenery}};
  Json ranges = Json::array();
  for (const RangeSample& sample : true_ranges(scene.rig)) {
    ranges.push_back({{"u_px", rounded(sample.at.u_px, 4)},
                      {"v_px", rounded(sample.at.v_px, 4)},
                      {"radius_px", rounded(sample.radius_px, 4)},
                      {"range_m", rounded(sample.spot.range_m, 6)},
                      {"bearing_deg", degrees(sample.spot.bearing_rad)}});
  }
  out["ranges"] = ranges;
  Json list = Json::array();
  for (const FrameTruth& frame : frames) {
    Json entry;
    entry["image"] = frame.image;
    entry["light"] = frame.light;
    entry["classes"] = map_file(frame.image, "classes");
    entry["objects_seen"] = map_file(frame.image, "objects");
    entry["pose"] = {{"x_m", rounded(frame.pose.x_m, 6)},
                     {"y_m", rounded(frame.pose.y_m, 6)},
                     {"heading_deg", degrees(frame.pose.heading_rad)}};
    Json objects = Json::array();
    for (const ObjectTruth& seen : frame.seen) objects.push_back(object_json(scene, seen));
    entry["objects"] = objects;
    list.push_back(entry);
  }
  out["frames"] = list;
  return out.dump(1) + "\n";
}

}  // namespace rondel::scene
