#include "calib/optics/sphere_model.h"

#include "calib/range/central_model.h"

namespace rondel::range {
namespace {

/// The unified sphere model (Geyer and Daniilidis 2000) on its meridian.
class SphereMeridian {
 public:
  SphereMeridian(double xi, double gamma_px, double longest_px)
      : xi_(xi), gamma_px_(gamma_px), longest_px_(longest_px) {}
  [[nodiscard]] std::vector<Parameter> parameters() const {
    using Prior = Parameter::Prior;
    return {{"xi", xi_, 0.3, 1.0, "sphere model xi", "", Prior::guess},
            {"gamma_px", gamma_px_, 0.1 * gamma_px_, 1.0, "image scale", "px", Prior::none}};
  }
  template <class T>
  [[nodiscard]] std::optional<Slope<T>> at(const T* p, const T& radius_px, const T& /*eye*/) const {
    if (!(optics::value_of(p[1]) > 0.0) || !(optics::value_of(p[0]) >= 0.0)) return std::nullopt;
    optics::SphereModel<T> model;
    model.xi = p[0];
    model.gamma_u_px = p[1];
    model.gamma_v_px = p[1];
    const auto d = optics::back_project(model, optics::Pixel<T>{radius_px, T(0.0)});
    if (!d) return std::nullopt;
    return Slope<T>{d->x, d->z};
  }
  [[nodiscard]] double longest_px() const { return longest_px_; }

 private:
  double xi_;
  double gamma_px_;
  double longest_px_;
};

}  // namespace

std::shared_ptr<const Model> make_sphere(const ModelInput& input, const ModelRow& row) {
  const double longest = longest_radius_px(input);
  // The start: of a grid of shapes and scales the one whose ranges are closest in proportion, the
  // eye's height free or as drawn.
  double best = std::numeric_limits<double>::infinity();
  double best_xi = 0.95;
  double best_gamma = 0.5 * longest;
  for (int i = 0; i <= 16; ++i) {
    const double xi = 0.5 + 0.05 * i;
    for (int j = 0; j <= 60; ++j) {
      const double gamma = longest * 0.05 * std::pow(100.0, j / 60.0);
      const SphereMeridian meridian(xi, gamma, longest);
      double sum = 0.0;
      double square = 0.0;
      int n = 0;
      for (const auto& [radius, range] : input.radius_px_range_m) {
        const std::array<double, 2> p{xi, gamma};
        const auto slope = meridian.at(p.data(), radius, 0.0);
        if (!slope || !(slope->down > 0.0) || !(slope->out > 0.0)) break;
        const double eye = range * slope->down / slope->out;
        const double log_eye = std::log(eye);
        sum += log_eye;
        square += log_eye * log_eye;
        ++n;
      }
      if (n == 0 || n < static_cast<int>(input.radius_px_range_m.size())) continue;
      const double mean = sum / n;
      const Parameter eye = eye_parameter(input);
      const double known = (std::log(eye.start) - mean) * eye.start / eye.scale * 0.03;
      const double cost =
          square / n - mean * mean + known * known + 1e-4 * std::pow((xi - 0.95) / 0.3, 2);
      if (cost < best) {
        best = cost;
        best_xi = xi;
        best_gamma = gamma;
      }
    }
  }
  return std::make_shared<CentralModel<SphereMeridian>>(
      full_name(row), input, row.tilt, SphereMeridian(best_xi, best_gamma, longest));
}

}  // namespace rondel::range
