#pragma once

#include <Eigen/Core>
#include <memory>
#include <optional>
#include <string>
#include <vector>

#include "calib/base/floor_map.h"
#include "calib/range/model.h"

namespace rondel::range {

/// A place on the floor with what is not known about it.
struct FloorEstimate {
  FloorSpot spot;
  double range_sd_m = 0.0;
  double bearing_sd_rad = 0.0;
  double band95_low_m = 0.0;
  double band95_high_m = 0.0;
};

/// A fitted model: pixels to floor and back, with the band that the fit's covariance gives by
/// linear propagation. The band is that of the curve, not of a single noisy pixel; it is symmetric
/// in the logarithm of the range.
class RangeCurve final : public FloorMap {
 public:
  /// `covariance` of the parameters (inverse information, prior included); `t95` the factor of a
  /// 95 % band: 1.96, or Student's where the noise was estimated; `radius_limit_px` from the
  /// centre, beyond which the curve says nothing.
  RangeCurve(std::shared_ptr<const Model> model,
             Params params,
             Eigen::MatrixXd covariance,
             double t95,
             ImagePoint centre,
             double radius_limit_px);

  [[nodiscard]] std::optional<FloorSpot> floor_at(ImagePoint at, double height_m) const override;
  [[nodiscard]] std::optional<ImagePoint> pixel_of(FloorSpot spot, double height_m) const override;
  /// floor_at with its band.
  [[nodiscard]] std::optional<FloorEstimate> floor_with_band(ImagePoint at, double height_m) const;

  [[nodiscard]] const Model& model() const { return *model_; }
  [[nodiscard]] std::shared_ptr<const Model> shared_model() const { return model_; }
  [[nodiscard]] const Params& params() const { return params_; }
  [[nodiscard]] const Eigen::MatrixXd& covariance() const { return covariance_; }
  [[nodiscard]] double t95() const { return t95_; }
  /// Of the rim, as observed.
  [[nodiscard]] ImagePoint centre() const { return centre_; }
  [[nodiscard]] double radius_limit_px() const { return radius_limit_px_; }
  /// The physical rig, where the model is one.
  [[nodiscard]] std::optional<optics::RigGeometry<double>> rig() const;
  /// The rig moved by one standard deviation along each independent direction in which the fit is
  /// uncertain; empty where the model is no rig.
  [[nodiscard]] std::vector<optics::RigGeometry<double>> rig_modes() const;

 private:
  std::shared_ptr<const Model> model_;
  Params params_;
  Eigen::MatrixXd covariance_;
  double t95_;
  ImagePoint centre_;
  double radius_limit_px_;
};

/// The largest range up to which the 95 % band stays inside the tolerance at every bearing, looking
/// outward from `from_m`; 0 where it does nowhere. At most `far_m`.
[[nodiscard]] double reach_m(const RangeCurve& curve,
                             const ToleranceSpec& tolerance,
                             double height_m,
                             double from_m,
                             double far_m);

}  // namespace rondel::range
