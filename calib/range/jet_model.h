#pragma once

#include <ceres/jet.h>

#include <cassert>
#include <utility>

#include "calib/optics/trace.h"
#include "calib/range/model.h"

namespace rondel::range {

/// No model has more parameters.
inline constexpr int kMostParameters = 18;
/// Derivatives by the parameters, then by the two coordinates of the place.
using Jet = ceres::Jet<double, kMostParameters + 2>;

/// Fills the derivatives of a model from formulas written once, for any scalar. `Derived` has
///   template <class T> std::optional<optics::Pixel<T>> pixel_in(const T* p, const T& x_m,
///                                                               const T& y_m, const T& h) const;
///   template <class T> std::optional<optics::Floor<T>> place_in(const T* p, const T& u_px,
///                                                               const T& v_px, const T& h) const;
///   template <class T> std::optional<optics::Pixel<T>> rim_centre_in(const T* p) const;
///   template <class T> std::optional<optics::Pixel<T>> reflection_in(const T* p) const;
///   double rim_slack_px() const;
template <class Derived>
class JetModel : public Model {
 public:
  [[nodiscard]] const std::vector<Parameter>& parameters() const final { return parameters_; }
  [[nodiscard]] const Eigen::MatrixXd& prior_information() const final {
    return prior_information_;
  }
  [[nodiscard]] Params start() const final {
    Params p(count());
    for (int i = 0; i < count(); ++i) p[i] = parameters_[static_cast<std::size_t>(i)].start;
    return p;
  }
  [[nodiscard]] std::optional<ImagePoint> pixel(const Params& p,
                                                FloorPoint at,
                                                double height_m) const final {
    const auto q = self().pixel_in(p.data(), at.x_m, at.y_m, height_m);
    if (!q) return std::nullopt;
    return ImagePoint{q->u_px, q->v_px};
  }
  [[nodiscard]] std::optional<FloorPoint> place(const Params& p,
                                                ImagePoint at,
                                                double height_m) const final {
    const auto q = self().place_in(p.data(), at.u_px, at.v_px, height_m);
    if (!q) return std::nullopt;
    return FloorPoint{q->x_m, q->y_m};
  }
  [[nodiscard]] std::optional<Projected> project(const Params& p,
                                                 FloorPoint at,
                                                 double height_m) const final {
    const auto jets = jets_of(p);
    const auto q = self().pixel_in(
        jets.data(), Jet(at.x_m, kMostParameters), Jet(at.y_m, kMostParameters + 1), Jet(height_m));
    if (!q || !finite(q->u_px) || !finite(q->v_px)) return std::nullopt;
    Projected result{{q->u_px.a, q->v_px.a}, derivatives(q->u_px, q->v_px), {}};
    result.by_place.row(0) = q->u_px.v.template tail<2>().transpose();
    result.by_place.row(1) = q->v_px.v.template tail<2>().transpose();
    return result;
  }
  [[nodiscard]] std::optional<Placed> locate(const Params& p,
                                             ImagePoint at,
                                             double height_m) const final {
    const auto jets = jets_of(p);
    const auto q = self().place_in(jets.data(), Jet(at.u_px), Jet(at.v_px), Jet(height_m));
    if (!q || !finite(q->x_m) || !finite(q->y_m)) return std::nullopt;
    return Placed{{q->x_m.a, q->y_m.a}, derivatives(q->x_m, q->y_m)};
  }
  [[nodiscard]] std::optional<RimCentre> rim_centre(const Params& p) const final {
    const auto jets = jets_of(p);
    return point_of(self().rim_centre_in(jets.data()), self().rim_slack_px());
  }
  [[nodiscard]] std::optional<RimCentre> reflection(const Params& p) const final {
    const auto jets = jets_of(p);
    return point_of(self().reflection_in(jets.data()), 0.0);
  }

 protected:
  /// Adds a parameter; its index.
  int add(Parameter parameter) {
    assert(count() < kMostParameters);
    parameters_.push_back(std::move(parameter));
    const int n = count();
    Eigen::MatrixXd grown = Eigen::MatrixXd::Zero(n, n);
    grown.topLeftCorner(n - 1, n - 1) = prior_information_;
    const Parameter& added = parameters_.back();
    if (added.prior != Parameter::Prior::none) {
      grown(n - 1, n - 1) = 1.0 / (added.scale * added.scale);
    }
    prior_information_ = std::move(grown);
    return n - 1;
  }
  /// Makes the prior knowledge of two parameters correlated.
  void correlate(int i, int j, double correlation) {
    const double si = parameters_[static_cast<std::size_t>(i)].scale;
    const double sj = parameters_[static_cast<std::size_t>(j)].scale;
    const double k = 1.0 / (1.0 - correlation * correlation);
    prior_information_(i, i) = k / (si * si);
    prior_information_(j, j) = k / (sj * sj);
    prior_information_(i, j) = prior_information_(j, i) = -k * correlation / (si * sj);
  }
  [[nodiscard]] int count() const { return static_cast<int>(parameters_.size()); }

 private:
  [[nodiscard]] const Derived& self() const { return static_cast<const Derived&>(*this); }
  [[nodiscard]] static bool finite(const Jet& x) {
    return std::isfinite(x.a) && x.v.array().isFinite().all();
  }
  [[nodiscard]] std::array<Jet, kMostParameters> jets_of(const Params& p) const {
    std::array<Jet, kMostParameters> jets;
    for (int i = 0; i < count(); ++i) jets[static_cast<std::size_t>(i)] = Jet(p[i], i);
    return jets;
  }
  [[nodiscard]] ByParams derivatives(const Jet& first, const Jet& second) const {
    ByParams d(2, count());
    d.row(0) = first.v.head(count()).transpose();
    d.row(1) = second.v.head(count()).transpose();
    return d;
  }
  [[nodiscard]] std::optional<RimCentre> point_of(const std::optional<optics::Pixel<Jet>>& q,
                                                  double slack_px) const {
    if (!q || !finite(q->u_px) || !finite(q->v_px)) return std::nullopt;
    return RimCentre{{q->u_px.a, q->v_px.a}, derivatives(q->u_px, q->v_px), slack_px};
  }

  std::vector<Parameter> parameters_;
  Eigen::MatrixXd prior_information_;
};

/// A vector of the floor's axes in the robot frame, and back.
template <class T>
[[nodiscard]] optics::Floor<T> turned_to_robot(const T& heading,
                                               bool mirrored,
                                               const T& x,
                                               const T& y) {
  using std::cos;
  using std::sin;
  const T across = mirrored ? y : -y;
  return {cos(heading) * x - sin(heading) * across, sin(heading) * x + cos(heading) * across};
}
template <class T>
[[nodiscard]] optics::Floor<T> turned_from_robot(const T& heading,
                                                 bool mirrored,
                                                 const T& x,
                                                 const T& y) {
  using std::cos;
  using std::sin;
  const T across = cos(heading) * y - sin(heading) * x;
  return {cos(heading) * x + sin(heading) * y, mirrored ? across : -across};
}

/// The heading as a parameter: free, known, or not one at all (-1).
[[nodiscard]] inline std::optional<Parameter> heading_parameter(const ModelInput& input) {
  if (input.heading == ModelInput::Heading::fixed) return std::nullopt;
  const bool known = input.heading == ModelInput::Heading::known;
  return Parameter{"heading_rad",
                   input.heading_rad,
                   known ? input.mounting.heading_rad : 0.1,
                   kDegPerRad,
                   "heading",
                   "deg",
                   known ? Parameter::Prior::known : Parameter::Prior::none};
}

/// The eye's height: from the drawing, or a guess that only says it is no house.
[[nodiscard]] inline Parameter eye_parameter(const ModelInput& input) {
  const std::optional<Uncertain> eye = input.rig.mounting.eye_height_m;
  return Parameter{"eye_height_m",
                   eye ? eye->value : 0.3,
                   eye ? std::max(eye->sd, 1e-6) : 0.5,
                   1e3,
                   "eye height",
                   "mm",
                   eye ? Parameter::Prior::known : Parameter::Prior::guess};
}

}  // namespace rondel::range
