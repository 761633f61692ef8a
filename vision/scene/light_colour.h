#pragma once

#include "vision/scene/vec3.h"

namespace rondel::scene {

/// Colour of a lamp or of daylight at `kelvin` (1700-25000), linear sRGB with luminance 1:
/// the Planckian locus (Kang et al. 2002) to 4000 K, the CIE daylight locus from 5500 K, a smooth
/// mix between. Negative components (below 1900 K, outside sRGB) are 0.
[[nodiscard]] Vec3 light_colour(double kelvin);

/// sRGB transfer curve (IEC 61966-2-1), linear 0..1 to coded 0..1, and back.
[[nodiscard]] double srgb_from_linear(double linear);
[[nodiscard]] double linear_from_srgb(double coded);

}  // namespace rondel::scene
