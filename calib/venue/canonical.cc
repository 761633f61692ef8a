#include "calib/venue/canonical.h"

#include <fmt/format.h>

#include "calib/base/file.h"

namespace rondel {
namespace {

std::string text(double value) { return number_text(value); }
std::string text(const Uncertain& value) {
  return fmt::format("{}+-{}", text(value.value), text(value.sd));
}
template <class T>
std::string text(const std::optional<T>& value) {
  return value ? text(*value) : "none";
}

std::string shape_text(const ConicSpec& conic) {
  return fmt::format("conic {} {} {}",
                     text(conic.vertex_radius_m),
                     text(conic.conic_constant),
                     text(conic.correlation));
}
std::string shape_text(const ConeSpec& cone) {
  return fmt::format("cone {}", text(cone.slope_rad));
}
std::string shape_text(const ProfileSpec& profile) {
  std::string out = fmt::format("profile {}", text(profile.sag_sd_m));
  for (const auto& [distance_m, sag_m] : profile.points_m) {
    out += fmt::format(" {}:{}", text(distance_m), text(sag_m));
  }
  return out;
}

}  // namespace

std::string canonical_camera(const RigSpec& rig) {
  return fmt::format("camera {} {} {} {}\n",
                     rig.camera.width_px,
                     rig.camera.height_px,
                     text(rig.camera.focal_px),
                     rig.camera.rgb565_order == ByteOrder::high_first ? "high" : "low");
}

std::string canonical_rig(const RigSpec& rig) {
  std::string out = canonical_camera(rig);
  if (rig.mirror) {
    out += fmt::format(
        "mirror {} {} {}\n",
        std::visit([](const auto& shape) { return shape_text(shape); }, rig.mirror->shape),
        text(rig.mirror->rim_radius_m),
        text(rig.mirror->distance_m));
  }
  const MountingSpec& mounting = rig.mounting;
  out += fmt::format("mounting {} {} {} {}\n",
                     text(mounting.eye_height_m),
                     mounting.mirrored ? (*mounting.mirrored ? "mirrored" : "plain") : "none",
                     text(mounting.heading_rad),
                     text(mounting.robot_radius_m));
  return out;
}

std::string canonical_objects(const VenueSpec& venue) {
  std::string out;
  for (const ObjectSpec& object : venue.objects) {
    out += fmt::format("object {} {} {} {}\n",
                       object.name,
                       static_cast<int>(object.shape),
                       text(object.diameter_m),
                       text(object.height_m));
  }
  return out;
}

std::string canonical_link(const VenueSpec& venue) {
  const LinkSpec& link = venue.link;
  return fmt::format("link {} {} {} {} {} {} {} {} {}\n",
                     link.baud,
                     text(link.reports_per_second),
                     link.bearing_codes,
                     link.range_bits,
                     text(link.near_m),
                     text(link.far_m),
                     static_cast<int>(link.check),
                     static_cast<int>(link.measure),
                     venue.prefix);
}

std::string canonical_budget(const VenueSpec& venue) {
  return fmt::format("budget {} {}\n", venue.budget.table_bytes, venue.budget.colour_bytes);
}

std::string canonical_tolerance(const VenueSpec& venue) {
  const ToleranceSpec& tolerance = venue.tolerance;
  return fmt::format("tolerance {} {} {} {}\n",
                     text(tolerance.range_relative),
                     text(tolerance.range_floor_m),
                     text(tolerance.bearing_rad),
                     text(tolerance.recall));
}

std::string canonical_noise(const VenueSpec& venue) {
  return fmt::format("noise {} {}\n", text(venue.noise.mark_px), text(venue.noise.tape_m));
}

std::string canonical_lighting(const VenueSpec& venue) {
  const LightingSpec& lighting = venue.lighting;
  return fmt::format("lighting {} {} {} {} {} {} {}\n",
                     text(lighting.stops[0]),
                     text(lighting.stops[1]),
                     text(lighting.kelvin[0]),
                     text(lighting.kelvin[1]),
                     lighting.auto_white_balance,
                     static_cast<int>(venue.hsv_scale),
                     text(venue.false_positive_cap));
}

std::string canonical_centre(const VenueSpec& venue) {
  if (!venue.centre) return "";
  return fmt::format("centre {} {} {}\n",
                     text(venue.centre->centre.u_px),
                     text(venue.centre->centre.v_px),
                     text(venue.centre->sd_px));
}

}  // namespace rondel
