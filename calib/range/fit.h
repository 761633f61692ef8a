#pragma once

#include <memory>
#include <optional>
#include <string>
#include <vector>

#include "calib/range/model.h"
#include "calib/range/range_curve.h"

namespace rondel::range {

/// A mark with everything that is known about it.
struct MarkInput {
  int line = 0;  ///< for messages; 0: none
  ImagePoint pixel;
  double pixel_sd_px = 0.5;
  double range_m = 0.0;
  std::optional<double> bearing_rad;
  double tape_sd_m = 0.003;  ///< of the place, along and across
  double height_m = 0.0;
  bool floor_mark = true;
};

struct FitInput {
  RigSpec rig;
  Mounting mounting;
  std::vector<MarkInput> marks;
  std::optional<ObservedPoint> rim_centre;
  std::optional<double> rim_radius_px;
  std::optional<ObservedPoint> reflection;
  ToleranceSpec tolerance;
  double near_m = 0.15;
  double far_m = 3.0;
  std::string only_model;  ///< full name; empty: all of the table that can be tried
};

/// A mark that does not fit the others. It is listed and left out of the fit.
struct Flagged {
  int mark = 0;                ///< index into FitInput::marks
  double studentised = 0.0;    ///< leave-one-out residual over its standard deviation (a distance)
  double p = 1.0;              ///< chance of so large a one among all marks
  double range_error_m = 0.0;  ///< tape minus what the others say
  double bearing_error_rad = 0.0;
  std::string guess;  ///< what may have happened; empty where the evidence supports nothing
};

/// What leaving each mark out in turn says.
struct MarkResidual {
  int mark = 0;
  double du_px = 0.0, dv_px = 0.0;  ///< marked minus fitted
  double studentised = 0.0;
  double leave_one_out_relative = 0.0;  ///< (predicted - taped) / taped range
  bool flagged = false;
};

struct Candidate {
  std::string model;
  int parameters = 0;
  double effective_parameters = 0.0;  ///< of which the marks decide
  double rms_px = 0.0;
  double leave_one_out_relative = 0.0;
  std::string refused;  ///< why it is out of the running
};

struct ParameterValue {
  Parameter parameter;
  double value = 0.0;
  double sd = 0.0;
};

struct FitResult {
  std::shared_ptr<const RangeCurve> curve;
  ModelInput model_input;  ///< with which the model can be made again
  std::string model;       ///< full name
  std::vector<ParameterValue> parameters;
  int marks = 0;  ///< used
  double rms_px = 0.0;
  double leave_one_out_relative = 0.0;  ///< root mean square; 0 without marks
  double noise_scale = 1.0;             ///< by which the assumed noise had to be multiplied
  double degrees_of_freedom = 0.0;
  double reach_m = 0.0;
  std::vector<MarkResidual> residuals;
  std::vector<Flagged> flagged;
  std::vector<Candidate> candidates;
  std::vector<std::string> notes;  ///< for people: what was assumed, what could not be told apart
};

/// Fits every model that can be tried and chooses one. Throws InputError where nothing can be said:
/// no drawing and too few marks, parameters that cannot be told apart, or marks that contradict
/// `mirrored`.
[[nodiscard]] FitResult fit_range(const FitInput& input);

}  // namespace rondel::range
