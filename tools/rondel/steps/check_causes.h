#pragma once

#include <memory>
#include <nlohmann/json.hpp>
#include <span>
#include <string>
#include <vector>

#include "calib/range/range_curve.h"
#include "calib/verdict/causes.h"
#include "calib/verdict/verdict.h"
#include "tools/rondel/steps/check_batch.h"

namespace rondel::app {

/// What every knock would do to the picture of a calibrated robot: of the physical rig where the
/// curve is one, else of its map from pixels to floor (with the rig's eye height, or the curve's
/// own). Keeps `curve`.
[[nodiscard]] std::shared_ptr<const verdict::KnockModel> knock_model(
    std::shared_ptr<const range::RangeCurve> curve, const RigSpec& rig);

/// The rows whose object was reported, also where it was reported somewhere else (a wrong tape row
/// or a turned robot looks like that). Blobs cut by the mask are left out: their place is biased.
[[nodiscard]] std::vector<verdict::Sighting> sightings_of(
    const VenueSpec& venue,
    const TapeBatch& batch,
    std::span<const std::vector<verdict::Find>> finds,
    const verdict::Verdict& verdict);

/// One standard deviation of a blob's place, px, and of the tape.
[[nodiscard]] verdict::SightingNoise sighting_noise(const VenueSpec& venue);

/// What went wrong, as check.json has it.
struct Causes {
  verdict::Diagnosis diagnosis;
  std::vector<verdict::DriftedLight> lights;
  /// {"cause", "id", "evidence", "sentence", "advice", ...} each, likeliest first.
  nlohmann::ordered_json causes = nlohmann::ordered_json::array();
  /// All explanations of the residuals with their criteria, best first.
  nlohmann::ordered_json hypotheses = nlohmann::ordered_json::array();
  /// Why nothing could be said, when so.
  std::string silence;
};

/// Looks for causes when the verdict is 'not accepted', and for drift inside the tolerance too.
/// `model` may be null (no curve): then only colours are looked at. `examiner` tells which places
/// are visible for a further mark.
[[nodiscard]] Causes find_causes(const VenueSpec& venue,
                                 const TapeBatch& batch,
                                 std::span<const std::vector<verdict::Find>> finds,
                                 const verdict::Verdict& verdict,
                                 const verdict::KnockModel* model,
                                 const Examiner& examiner);

}  // namespace rondel::app
