#include <algorithm>
#include <cmath>
#include <variant>

#include "calib/range/jet_model.h"

namespace rondel::range {
namespace {

/// The physical trace with its drawing as prior knowledge.
class DrawingModel final : public JetModel<DrawingModel> {
 public:
  DrawingModel(const ModelInput& input, bool tilt)
      : name_(tilt ? "drawing+tilt" : "drawing"),
        mirrored_(input.mirrored),
        heading_rad_(input.heading_rad),
        rim_radius_m_(input.rig.mirror->rim_radius_m) {
    using Prior = Parameter::Prior;
    const MirrorSpec& mirror = *input.rig.mirror;
    const auto known =
        [&](std::string name, Uncertain value, double factor, std::string shown, std::string unit) {
          return add({std::move(name),
                      value.value,
                      std::max(value.sd, 1e-9),
                      factor,
                      std::move(shown),
                      std::move(unit),
                      Prior::known});
        };
    known("focal_px", *input.rig.camera.focal_px, 1.0, "focal length", "px");
    const double pp = input.mounting.principal_point_px;
    known("cu_px", {0.5 * (input.rig.camera.width_px - 1), pp}, 1.0, "principal point u", "px");
    known("cv_px", {0.5 * (input.rig.camera.height_px - 1), pp}, 1.0, "principal point v", "px");
    known("distance_m", mirror.distance_m, 1e3, "pinhole to mirror", "mm");
    add(eye_parameter(input));
    if (const auto* conic = std::get_if<ConicSpec>(&mirror.shape)) {
      kind_ = optics::MirrorKind::conic;
      shape_ = known("vertex_radius_m", conic->vertex_radius_m, 1e3, "vertex radius", "mm");
      const int k = known("conic_constant", conic->conic_constant, 1.0, "conic constant", "");
      if (conic->correlation != 0.0) correlate(shape_, k, conic->correlation);
    } else if (const auto* cone = std::get_if<ConeSpec>(&mirror.shape)) {
      kind_ = optics::MirrorKind::cone;
      shape_ = known("slope_rad", cone->slope_rad, kDegPerRad, "slope", "deg");
    } else {
      kind_ = optics::MirrorKind::profile;
      const auto& spec = std::get<ProfileSpec>(mirror.shape);
      profile_ = optics::Profile::fit(spec.points_m, spec.sag_sd_m);
      shape_ = count();
      for (std::size_t m = 0; m < optics::kProfileModes; ++m) {
        known("profile_mode_" + std::to_string(m + 1),
              {0.0, 1.0},
              1.0,
              "profile mode " + std::to_string(m + 1),
              "sd");
      }
    }
    if (const auto heading = heading_parameter(input)) heading_ = add(*heading);
    if (tilt) {
      const Mounting& m = input.mounting;
      tilt_ = known(
          "mirror_tilt_u_rad", {0.0, m.mirror_tilt_rad}, kDegPerRad, "mirror tilt along u", "deg");
      known(
          "mirror_tilt_v_rad", {0.0, m.mirror_tilt_rad}, kDegPerRad, "mirror tilt along v", "deg");
      known("mirror_shift_u_m", {0.0, m.mirror_shift_m}, 1e3, "mirror shift along u", "mm");
      known("mirror_shift_v_m", {0.0, m.mirror_shift_m}, 1e3, "mirror shift along v", "mm");
      known("chassis_tilt_u_rad",
            {0.0, m.chassis_tilt_rad},
            kDegPerRad,
            "chassis tilt along u",
            "deg");
      known("chassis_tilt_v_rad",
            {0.0, m.chassis_tilt_rad},
            kDegPerRad,
            "chassis tilt along v",
            "deg");
    }
  }

  [[nodiscard]] std::string name() const override { return name_; }
  [[nodiscard]] std::optional<optics::RigGeometry<double>> rig(const Params& p) const override {
    return rig_in(p.data());
  }

  template <class T>
  [[nodiscard]] std::optional<optics::Pixel<T>> pixel_in(const T* p,
                                                         const T& x_m,
                                                         const T& y_m,
                                                         const T& height_m) const {
    return optics::floor_to_pixel(rig_in(p), x_m, y_m, height_m);
  }
  template <class T>
  [[nodiscard]] std::optional<optics::Floor<T>> place_in(const T* p,
                                                         const T& u_px,
                                                         const T& v_px,
                                                         const T& height_m) const {
    return optics::pixel_to_floor(rig_in(p), u_px, v_px, height_m);
  }
  template <class T>
  [[nodiscard]] std::optional<optics::Pixel<T>> rim_centre_in(const T* p) const {
    if (!(rim_radius_m_ > 0.0)) return std::nullopt;
    const auto rim = optics::rim_image(rig_in(p), T(rim_radius_m_));
    if (!rim) return std::nullopt;
    return rim->centre;
  }
  template <class T>
  [[nodiscard]] std::optional<optics::Pixel<T>> reflection_in(const T* p) const {
    return optics::reflection_centre(rig_in(p));
  }
  [[nodiscard]] double rim_slack_px() const { return 0.0; }

 private:
  template <class T>
  [[nodiscard]] optics::RigGeometry<T> rig_in(const T* p) const {
    optics::RigGeometry<T> rig;
    rig.focal_px = p[0];
    rig.cu_px = p[1];
    rig.cv_px = p[2];
    rig.distance_m = p[3];
    rig.eye_height_m = p[4];
    rig.mirror.kind = kind_;
    switch (kind_) {
      case optics::MirrorKind::conic:
        rig.mirror.vertex_radius_m = p[shape_];
        rig.mirror.conic_constant = p[shape_ + 1];
        break;
      case optics::MirrorKind::cone:
        rig.mirror.slope_rad = p[shape_];
        break;
      case optics::MirrorKind::profile:
        rig.mirror.profile = profile_;
        for (std::size_t m = 0; m < optics::kProfileModes; ++m) {
          rig.mirror.profile_modes[m] = p[shape_ + static_cast<int>(m)];
        }
        break;
    }
    rig.heading_rad = heading_ >= 0 ? p[heading_] : T(heading_rad_);
    if (tilt_ >= 0) {
      rig.tilt_x = p[tilt_];
      rig.tilt_y = p[tilt_ + 1];
      rig.shift_x_m = p[tilt_ + 2];
      rig.shift_y_m = p[tilt_ + 3];
      rig.floor_tilt_x = p[tilt_ + 4];
      rig.floor_tilt_y = p[tilt_ + 5];
    }
    rig.mirrored = mirrored_;
    return rig;
  }

  std::string name_;
  bool mirrored_;
  double heading_rad_;
  double rim_radius_m_;
  optics::MirrorKind kind_ = optics::MirrorKind::conic;
  std::shared_ptr<const optics::Profile> profile_;
  int shape_ = 0;
  int heading_ = -1;
  int tilt_ = -1;
};

}  // namespace

std::shared_ptr<const Model> make_drawing(const ModelInput& input, const ModelRow& row) {
  return std::make_shared<DrawingModel>(input, row.tilt);
}

}  // namespace rondel::range
