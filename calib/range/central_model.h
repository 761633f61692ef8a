#pragma once

#include <algorithm>
#include <cmath>
#include <string>
#include <utility>

#include "calib/range/jet_model.h"

namespace rondel::range {

/// A line of sight in the plane through the mirror's axis: so far outwards for so far down. Its
/// length does not matter.
template <class T>
struct Slope {
  T out, down;
};

/// A camera all of whose lines of sight start in one point, `eye_height_m` above the floor, and
/// whose image is round: an image radius stands for a slope, by the model's `Meridian`; tilt turns
/// the whole bundle. `Meridian` has
///   std::vector<Parameter> parameters() const;
///   template <class T> std::optional<Slope<T>> at(const T* p, const T& radius_px,
///                                                 const T& eye_height_m) const;
///   double longest_px() const;   // no radius beyond this is asked for
template <class Meridian>
class CentralModel final : public JetModel<CentralModel<Meridian>> {
  using Base = JetModel<CentralModel<Meridian>>;

 public:
  CentralModel(std::string name, const ModelInput& input, bool tilt, Meridian meridian)
      : name_(std::move(name)),
        meridian_(std::move(meridian)),
        mirrored_(input.mirrored),
        heading_rad_(input.heading_rad) {
    using Prior = Parameter::Prior;
    const double pp = input.mounting.principal_point_px;
    const ImagePoint middle{0.5 * (input.rig.camera.width_px - 1),
                            0.5 * (input.rig.camera.height_px - 1)};
    // The bundle's own centre lies near the rim's: mounting shifts and tilts part them by this
    // much.
    const double near_px = input.rim_centre ? 2.0 : pp;
    slack_px_ = near_px;
    const ImagePoint centre = input.rim_centre ? input.rim_centre->at : middle;
    this->add({"cu_px",
               centre.u_px,
               input.rim_centre ? 3.0 * pp : pp,
               1.0,
               "centre u",
               "px",
               Prior::known});
    this->add({"cv_px",
               centre.v_px,
               input.rim_centre ? 3.0 * pp : pp,
               1.0,
               "centre v",
               "px",
               Prior::known});
    this->add(eye_parameter(input));
    meridian_first_ = this->count();
    for (Parameter& p : meridian_.parameters()) this->add(std::move(p));
    if (const auto heading = heading_parameter(input)) heading_ = this->add(*heading);
    if (tilt) {
      // A mirror's tilt turns lines of sight by twice itself.
      const double sd =
          std::hypot(2.0 * input.mounting.mirror_tilt_rad, input.mounting.chassis_tilt_rad);
      tilt_ = this->add({"tilt_u_rad", 0.0, sd, kDegPerRad, "tilt along u", "deg", Prior::known});
      this->add({"tilt_v_rad", 0.0, sd, kDegPerRad, "tilt along v", "deg", Prior::known});
    }
  }

  [[nodiscard]] std::string name() const override { return name_; }
  [[nodiscard]] std::optional<optics::RigGeometry<double>> rig(const Params& /*p*/) const override {
    return std::nullopt;
  }

  template <class T>
  [[nodiscard]] std::optional<optics::Floor<T>> place_in(const T* p,
                                                         const T& u_px,
                                                         const T& v_px,
                                                         const T& height_m) const {
    using std::sqrt;
    const T du = u_px - p[0];
    const T dv = v_px - p[1];
    const T square = du * du + dv * dv;
    if (!(optics::value_of(square) > 1e-12)) return std::nullopt;
    const T radius = sqrt(square);
    if (optics::value_of(radius) > meridian_.longest_px()) return std::nullopt;
    const auto slope = meridian_.at(p + meridian_first_, radius, p[2]);
    if (!slope || !(optics::value_of(slope->out) > 0.0)) return std::nullopt;
    const optics::Vec3<T> sight{slope->out * du / radius, slope->out * dv / radius, -slope->down};
    const optics::Vec3<T> plumb = tilt_ >= 0 ? optics::turn_onto_z(up_in(p), sight) : sight;
    const T drop = p[2] - height_m;
    if (!(optics::value_of(plumb.z) < 0.0) || !(optics::value_of(drop) > 0.0)) return std::nullopt;
    const T along = -drop / plumb.z;
    return turned_to_robot(heading_in(p), mirrored_, T(along * plumb.x), T(along * plumb.y));
  }

  template <class T>
  [[nodiscard]] std::optional<optics::Pixel<T>> pixel_in(const T* p,
                                                         const T& x_m,
                                                         const T& y_m,
                                                         const T& height_m) const {
    using std::sqrt;
    const T drop = p[2] - height_m;
    if (!(optics::value_of(drop) > 0.0)) return std::nullopt;
    const optics::Floor<T> axes = turned_from_robot(heading_in(p), mirrored_, x_m, y_m);
    const optics::Vec3<T> plumb{axes.x_m, axes.y_m, -drop};
    const optics::Vec3<T> sight = tilt_ >= 0 ? optics::turn_from_z(up_in(p), plumb) : plumb;
    const T square = sight.x * sight.x + sight.y * sight.y;
    if (!(optics::value_of(square) > 1e-18)) return std::nullopt;
    const T lateral = sqrt(square);
    const T down = -sight.z;
    const auto radius = radius_of(p, lateral, down);
    if (!radius) return std::nullopt;
    return optics::Pixel<T>{p[0] + *radius * sight.x / lateral, p[1] + *radius * sight.y / lateral};
  }

  template <class T>
  [[nodiscard]] std::optional<optics::Pixel<T>> rim_centre_in(const T* p) const {
    return optics::Pixel<T>{p[0], p[1]};
  }
  template <class T>
  [[nodiscard]] std::optional<optics::Pixel<T>> reflection_in(const T* /*p*/) const {
    return std::nullopt;
  }
  [[nodiscard]] double rim_slack_px() const { return slack_px_; }

 private:
  template <class T>
  [[nodiscard]] optics::Vec3<T> up_in(const T* p) const {
    return optics::unit_from_slopes(p[tilt_], p[tilt_ + 1]);
  }
  template <class T>
  [[nodiscard]] T heading_in(const T* p) const {
    return heading_ >= 0 ? p[heading_] : T(heading_rad_);
  }

  /// The smallest image radius that looks along the slope: marched outwards, then bisected and
  /// polished on plain numbers; one Newton step in T carries the derivatives.
  template <class T>
  [[nodiscard]] std::optional<T> radius_of(const T* p, const T& out, const T& down) const {
    std::array<double, kMostParameters> plain{};
    const int size = static_cast<int>(this->parameters().size()) - meridian_first_;
    for (int i = 0; i < size; ++i) {
      plain[static_cast<std::size_t>(i)] = optics::value_of(p[meridian_first_ + i]);
    }
    const double eye = optics::value_of(p[2]);
    const double want_out = optics::value_of(out);
    const double want_down = optics::value_of(down);
    using Line = optics::Dual<1>;
    const auto miss = [&](double radius) -> std::optional<Line> {
      std::array<Line, kMostParameters> q{};
      for (int i = 0; i < size; ++i) {
        q[static_cast<std::size_t>(i)] = Line(plain[static_cast<std::size_t>(i)]);
      }
      const auto slope = meridian_.at(q.data(), Line::variable(radius, 0), Line(eye));
      if (!slope) return std::nullopt;
      return slope->out * Line(want_down) - slope->down * Line(want_out);
    };
    constexpr int kSteps = 48;
    const double step = meridian_.longest_px() / kSteps;
    double low = 1e-9 * step;
    const auto first = miss(low);
    if (!first || first->a >= 0.0) return std::nullopt;
    double high = low;
    bool found = false;
    for (int i = 1; i <= kSteps && !found; ++i) {
      high = step * i;
      const auto m = miss(high);
      if (!m) return std::nullopt;
      if (m->a >= 0.0) {
        found = true;
      } else {
        low = high;
      }
    }
    if (!found) return std::nullopt;
    double radius = 0.5 * (low + high);
    double slope = 0.0;
    for (int i = 0; i < 60; ++i) {
      const auto m = miss(radius);
      if (!m) return std::nullopt;
      slope = m->d[0];
      (m->a < 0.0 ? low : high) = radius;
      double next = slope > 0.0 ? radius - m->a / slope : low - 1.0;
      if (!(next > low && next < high)) next = 0.5 * (low + high);
      const bool done = std::abs(next - radius) < 1e-12 * (1.0 + radius);
      radius = next;
      if (done) break;
    }
    if (!(slope > 0.0)) return std::nullopt;
    const auto refined = meridian_.at(p + meridian_first_, T(radius), p[2]);
    if (!refined) return std::nullopt;
    return T(radius) - (refined->out * down - refined->down * out) / T(slope);
  }

  std::string name_;
  Meridian meridian_;
  bool mirrored_;
  double heading_rad_;
  double slack_px_;
  int meridian_first_ = 0;
  int heading_ = -1;
  int tilt_ = -1;
};

/// The radius up to which a model without a drawing may be asked: a little beyond the image.
[[nodiscard]] inline double longest_radius_px(const ModelInput& input) {
  return 0.75 * std::hypot(input.rig.camera.width_px, input.rig.camera.height_px);
}

}  // namespace rondel::range
