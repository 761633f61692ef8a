#pragma once

#include <Eigen/Core>
#include <limits>
#include <memory>
#include <optional>
#include <span>
#include <string>
#include <vector>

#include "calib/base/geometry.h"
#include "calib/optics/rig.h"
#include "calib/venue/centre_result.h"
#include "calib/venue/spec.h"

namespace rondel::range {

/// One number a model is made of.
struct Parameter {
  std::string name;           ///< "focal_px"
  double start = 0.0;         ///< where a fit begins; the mean of the prior
  double scale = 1.0;         ///< a natural step: the prior's standard deviation, or a typical size
  double shown_factor = 1.0;  ///< shown value = value * shown_factor, in shown_unit
  std::string shown_name;     ///< "mirror tilt along u"
  std::string shown_unit;     ///< "mm"
  /// Known beforehand with standard deviation `scale`; a `guess` is such knowledge too, but so weak
  /// that it only says in which order of size to look.
  enum class Prior { none, guess, known } prior = Prior::none;
};

using Params = Eigen::VectorXd;
/// Derivatives of (u, v) or (x, y) by all parameters: 2 x parameters.
using ByParams = Eigen::Matrix<double, 2, Eigen::Dynamic>;

struct Projected {
  ImagePoint at;
  ByParams by_params;        ///< px per unit of each parameter
  Eigen::Matrix2d by_place;  ///< d(u, v) / d(x, y), px/m
};

struct Placed {
  FloorPoint at;
  ByParams by_params;  ///< m per unit of each parameter
};

struct RimCentre {
  ImagePoint at;
  ByParams by_params;
  double slack_px = 0.0;  ///< how far the model's own idea of the rim's centre may be off, 1 sd
};

/// How pixels and floor places belong together, up to parameters. Immutable; models differ in what
/// they need to know (design: drawing, sphere, taylor, polynomial) and all of them predict a pixel
/// from a place in the robot frame and a height, with derivatives.
class Model {
 public:
  Model() = default;
  Model(const Model&) = delete;
  Model& operator=(const Model&) = delete;
  virtual ~Model() = default;

  [[nodiscard]] virtual std::string name() const = 0;
  [[nodiscard]] virtual const std::vector<Parameter>& parameters() const = 0;
  /// Inverse covariance of what is known beforehand, parameters x parameters.
  [[nodiscard]] virtual const Eigen::MatrixXd& prior_information() const = 0;

  /// No answers where the place cannot be seen, or the pixel shows no such place.
  [[nodiscard]] virtual std::optional<ImagePoint> pixel(const Params& p,
                                                        FloorPoint at,
                                                        double height_m) const = 0;
  [[nodiscard]] virtual std::optional<FloorPoint> place(const Params& p,
                                                        ImagePoint at,
                                                        double height_m) const = 0;
  /// The same with derivatives.
  [[nodiscard]] virtual std::optional<Projected> project(const Params& p,
                                                         FloorPoint at,
                                                         double height_m) const = 0;
  [[nodiscard]] virtual std::optional<Placed> locate(const Params& p,
                                                     ImagePoint at,
                                                     double height_m) const = 0;
  /// Where the rim's centre is imaged. No answer where the model does not know a rim.
  [[nodiscard]] virtual std::optional<RimCentre> rim_centre(const Params& p) const = 0;
  /// Where the camera sees itself.
  [[nodiscard]] virtual std::optional<RimCentre> reflection(const Params& p) const = 0;
  /// Parameters brought near the marks before a fit, where the model has no drawing to start from.
  [[nodiscard]] virtual Params start() const = 0;
  /// The physical rig with these parameters; only of a drawing.
  [[nodiscard]] virtual std::optional<optics::RigGeometry<double>> rig(const Params& p) const = 0;
};

/// Index of a parameter by name, or -1.
[[nodiscard]] int index_of(const Model& model, const std::string& parameter);

/// What is usual for how a robot is put together, one standard deviation each; used as priors.
struct Mounting {
  double mirror_tilt_rad = 0.5 * kRadPerDeg;
  double mirror_shift_m = 0.3e-3;
  double chassis_tilt_rad = 0.3 * kRadPerDeg;
  double principal_point_px = 8.0;
  double heading_rad = 1.0 * kRadPerDeg;  ///< of a heading that was given
};

/// Everything besides the marks that a model is built from.
struct ModelInput {
  RigSpec rig;
  Mounting mounting;
  std::optional<ObservedPoint> rim_centre;
  bool mirrored = true;
  double heading_rad = 0.0;
  enum class Heading { free, known, fixed } heading = Heading::free;
  /// Image radius and range pairs of the marks at the floor (or brought down to it), which give the
  /// models without a drawing their start.
  std::vector<std::pair<double, double>> radius_px_range_m;
};

/// One row of the table of models.
struct ModelRow {
  std::string name;   ///< "drawing"
  bool tilt = false;  ///< with tilt (and shift) terms
  int order = 0;      ///< of the polynomial
  bool needs_drawing = false;
  std::shared_ptr<const Model> (*make)(const ModelInput&, const ModelRow&);
};
/// In order of preference: what knows more first, then fewer parameters.
[[nodiscard]] std::span<const ModelRow> model_table();
/// "drawing+tilt", "polynomial4".
[[nodiscard]] std::string full_name(const ModelRow& row);
[[nodiscard]] const ModelRow* find_model(const std::string& full_name);

/// Of the table; one file each.
[[nodiscard]] std::shared_ptr<const Model> make_drawing(const ModelInput& input,
                                                        const ModelRow& row);
[[nodiscard]] std::shared_ptr<const Model> make_sphere(const ModelInput& input,
                                                       const ModelRow& row);
[[nodiscard]] std::shared_ptr<const Model> make_taylor(const ModelInput& input,
                                                       const ModelRow& row);
[[nodiscard]] std::shared_ptr<const Model> make_polynomial(const ModelInput& input,
                                                           const ModelRow& row);

}  // namespace rondel::range
