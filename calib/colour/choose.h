#pragma once

#include <array>
#include <optional>
#include <string>
#include <utility>
#include <vector>

#include "calib/base/progress.h"
#include "calib/colour/box_search.h"
#include "calib/colour/counts.h"
#include "calib/colour/lights.h"
#include "calib/colour/threshold_set.h"

namespace rondel::colour {

/// Labelled pixels of the frames made in one light.
struct LightSamples {
  std::string light;
  std::vector<RgbCounts> objects;  ///< one entry an object, in the venue's order; may be empty
  RgbCounts surroundings;
  SensorNoise noise;  ///< of the frames; all zero: unknown
};

struct ChooseOptions {
  /// Every light is multiplied by each of these. The unchanged light comes first.
  std::vector<LightChange> changes = {LightChange{}};
  bool rgb565 = true;                ///< pixels are rounded as the board sees them
  double false_positive_cap = 1e-4;  ///< share of surroundings inside a set, all lights together
  double overlap_cap = 2e-3;         ///< share of each other object's pixels, all lights together
  double recall = 0.95;              ///< below it a second box is tried; edge of the envelope
  double middle_kelvin = 5800.0;     ///< colour temperature the frames stand for
  bool per_light = false;            ///< also a set for each light, always
  BoxSearchOptions search;
};

/// How far light may move before a set fails: until the worst light's recall falls under
/// ChooseOptions::recall, or false positives exceed ten times their cap. From as captured outwards,
/// the other coordinate unchanged. None where it fails as captured already.
struct Envelope {
  std::optional<std::array<double, 2>> stops;   ///< within kEnvelopeStops
  std::optional<std::array<double, 2>> kelvin;  ///< within kEnvelopeKelvin
  std::array<std::string, 4> broken_by;  ///< light that fails at the low and high end of each;
                                         ///< empty: the end of what was looked at
};
inline constexpr std::array<double, 2> kEnvelopeStops = {-3.0, 3.0};
inline constexpr std::array<double, 2> kEnvelopeKelvin = {2200.0, 12000.0};

/// Where an object's colours in one light are those of something else in another.
struct Collision {
  std::string light, change;            ///< where the object loses most
  std::string with;                     ///< "surroundings" or another object's name
  std::string with_light, with_change;  ///< where that has the same colours
  double share = 0.0;                   ///< of its pixels there that have them
};

/// What one light alone would allow.
struct LightSet {
  std::string light;
  ThresholdSet set;
  double score = 0.0;  ///< worst over the changes of this light
};

/// One object's set and what is known of it.
struct ChosenSet {
  ThresholdSet set;
  std::vector<std::pair<std::string, double>> recall_by_light;  ///< worst over the changes
  std::vector<std::pair<std::string, double>> recall_as_captured;
  std::string worst_light;
  std::string worst_change;
  double false_positive_rate = 0.0;
  double score = 0.0;  ///< worst over lights and changes
  /// No set of one box on the grid scores more. With two boxes: no other second box beside either
  /// of them does.
  double bound = 0.0;
  double gap = 0.0;            ///< what an interrupted search has not settled
  double one_box_score = 0.0;  ///< what the best single box reaches
  Envelope envelope;
  std::vector<Collision> collisions;  ///< only where `score` is below ChooseOptions::recall
  std::vector<std::string> advice;    ///< what would help, with numbers; likewise
  std::vector<LightSet> per_light;    ///< likewise, or where asked for
};

/// The best set of every object, in the order of LightSamples::objects. An object without a pixel
/// in any light gets a set without boxes. Objects are searched for in parallel.
[[nodiscard]] std::vector<ChosenSet> choose_sets(const std::vector<LightSamples>& samples,
                                                 const std::vector<std::string>& objects,
                                                 const ChooseOptions& options,
                                                 Progress& progress);

/// Share of `pixels` that are in `set` after a change; 0 without pixels.
[[nodiscard]] double share_in(const RgbCounts& pixels,
                              const ThresholdSet& set,
                              const ColourShift& shift);

}  // namespace rondel::colour
