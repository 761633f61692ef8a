#pragma once

#include <functional>
#include <optional>
#include <span>
#include <string>
#include <vector>

#include "calib/base/geometry.h"
#include "calib/verdict/knocks.h"
#include "calib/verdict/verdict.h"

namespace rondel::verdict {

/// A row whose object was found: what the tape says and where the picture shows it.
struct Sighting {
  int line = 0;  ///< in tape.csv
  FloorSpot tape;
  bool bearing_known = false;
  double height_m = 0.0;  ///< the object is seen at
  ImagePoint seen;        ///< sub-pixel, before tables and codes
};

/// How sure sightings are. The noise scale is refined from the residuals themselves, these numbers
/// counting like `prior_values` values.
struct SightingNoise {
  double pixel_sd = 0.3;
  double tape_sd_m = 0.003;
  double prior_values = 20.0;
};

/// A row that cannot be right, and what it should probably read.
struct WrongRow {
  int line = 0;
  FloorSpot tape;
  bool bearing_known = false;
  std::optional<FloorSpot> likely;
  double p = 0.0;  ///< chance of a row this far off among rows that are right
};

/// One explanation of the residuals, fitted.
struct Hypothesis {
  std::string id;     ///< "none", "tilt", "tape"
  std::string cause;  ///< "Mirror tilted by 1.1 deg", with what the fit says
  std::optional<KnockKind> kind;
  std::vector<double> amounts;     ///< as KnockInfo says
  std::vector<double> amounts_sd;  ///< one standard deviation each
  std::vector<WrongRow> rows;      ///< wrong rows: of id "tape" all it says, else beside the knock
  int parameters = 0;
  double criterion = 0.0;  ///< corrected information criterion; smaller is better
  double evidence = 0.0;   ///< criterion of 'nothing wrong' minus this one: larger is stronger
  double p = 1.0;          ///< chance of as good a fit were nothing wrong, all hypotheses counted
  double explained = 0.0;  ///< share of the squared whitened residuals that it takes away
  double rms_px = 0.0;     ///< residual that is left, per coordinate
};

/// Where one more mark would tell two explanations apart.
struct TellApart {
  FloorSpot spot;
  double apart_px = 0.0;     ///< between the two predictions
  double apart_sigma = 0.0;  ///< the same over its standard deviation
};

struct Diagnosis {
  /// Every hypothesis that could be fitted, best first.
  std::vector<Hypothesis> hypotheses;
  /// How many of the first are real candidates: 0 nothing is wrong, 1 one cause, more: they cannot
  /// be told apart with this data.
  int causes = 0;
  std::optional<TellApart> tell_apart;  ///< for the first two, when they cannot be
  /// Rows that stand out beside the cause itself.
  std::vector<WrongRow> odd_rows;
  int sightings = 0;
  double rms_px = 0.0;    ///< before any explanation, per coordinate
  double noise_px = 0.0;  ///< one standard deviation of a place, as the residuals show it
  /// Why nothing could be said, when so: too few rows.
  std::string silence;
};

/// At least this many rows are needed for a diagnosis.
inline constexpr int kLeastSightings = 4;
/// More are thinned evenly: the covariance is dense.
inline constexpr int kMostSightings = 250;

/// Fits every knock, wrong tape rows and 'nothing wrong' to the same residuals (seen minus
/// predicted pixel) and compares them.
///
/// Residuals are whitened with pixel noise, the tape's noise carried into the image and the
/// calibration's own uncertainty (the model's modes), so that an uncertain calibration is not taken
/// for a knock. Pixel and tape noise are scaled to what the residuals show beside the best
/// explanation; the scale stays unknown with a prior around that: -2 ln L = (v + n) ln(1 + Q/v)
/// with v = prior_values (the marginal of a scaled inverse chi-square prior). Rows that stand out
/// from an explanation count as free in it. Compared by the corrected criterion of Hurvich and Tsai
/// (1989); a cause is only named when an F test against 'nothing wrong', multiplied by the number
/// of hypotheses (Bonferroni), says so. `visible` tells which floor places a further mark could be
/// measured at; `far_m` how far out. Assumes one cause (and perhaps odd rows) and rows independent
/// of each other; a tape laid from a wrong zero looks like a knock.
[[nodiscard]] Diagnosis diagnose(const KnockModel& model,
                                 std::span<const Sighting> sightings,
                                 const SightingNoise& noise,
                                 double far_m,
                                 const std::function<bool(FloorSpot)>& visible);

/// A light whose objects are missed more often than elsewhere.
struct DriftedLight {
  std::string light;
  std::string object;  ///< empty: all objects
  int rows = 0;
  int found = 0;
  double p = 1.0;         ///< chance of so few, all lights and objects counted
  double evidence = 0.0;  ///< as Hypothesis::evidence
};

/// Lights in which fewer objects were found than `recall` asks for, and not by chance: a binomial
/// test, multiplied by the number of lights and objects looked at. An object alone is named where
/// the light's others hold, else the light.
[[nodiscard]] std::vector<DriftedLight> drifted_lights(const VenueSpec& venue,
                                                       std::span<const ImageEntry> images,
                                                       std::span<const TapeEntry> tape,
                                                       std::span<const RowResult> rows);

/// Refits one kind of knock to the sightings. Nothing where it cannot be fitted.
[[nodiscard]] std::optional<std::vector<double>> fit_knock(const KnockModel& model,
                                                           KnockKind kind,
                                                           std::span<const Sighting> sightings,
                                                           const SightingNoise& noise);

}  // namespace rondel::verdict
