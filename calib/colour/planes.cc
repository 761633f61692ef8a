#include "calib/colour/planes.h"

#include <algorithm>
#include <cmath>

namespace rondel::colour {
namespace {

template <class Grid>
void scale_to_largest(Grid& grid) {
  float most = 0.0F;
  for (const auto& row : grid) most = std::max(most, *std::max_element(row.begin(), row.end()));
  if (most <= 0.0F) return;
  for (auto& row : grid) {
    for (float& value : row) value = std::sqrt(value / most);
  }
}

}  // namespace

Planes planes_of(const std::vector<const RgbCounts*>& pixels) {
  Planes planes;
  for (const RgbCounts* counts : pixels) {
    for (const RgbCounts::Entry& entry : counts->entries) {
      const Hsv p = to_hsv(entry.colour);
      const auto count = static_cast<float>(entry.count);
      planes.hs[p.s / 8U][p.h / 4U] += count;
      planes.sv[p.v / 8U][p.s / 8U] += count;
    }
  }
  scale_to_largest(planes.hs);
  scale_to_largest(planes.sv);
  return planes;
}

EnvelopeMap envelope_map(const std::vector<LightSamples>& samples,
                         std::size_t object,
                         const ThresholdSet& set,
                         const ChooseOptions& options) {
  EnvelopeMap map;
  for (double stops = kEnvelopeStops[0]; stops <= kEnvelopeStops[1]; stops += 0.5) {
    map.stops.push_back(stops);
  }
  // Equal steps in reciprocal megakelvin, as the eye and the camera take them.
  constexpr int kRows = 13;
  for (int k = 0; k < kRows; ++k) {
    const double low = 1e6 / kEnvelopeKelvin[1];
    const double high = 1e6 / kEnvelopeKelvin[0];
    map.kelvin.push_back(1e6 / (high + (low - high) * k / (kRows - 1)));
  }
  for (const double kelvin : map.kelvin) {
    std::vector<double>& row = map.recall.emplace_back();
    for (const double stops : map.stops) {
      const LightChange change = change_of_light(stops, options.middle_kelvin, kelvin);
      double worst = 1.0;
      for (const LightSamples& light : samples) {
        if (light.objects[object].entries.empty()) continue;
        const ColourShift shift(change, options.rgb565, light.noise);
        worst = std::min(worst, share_in(light.objects[object], set, shift));
      }
      row.push_back(worst);
    }
  }
  return map;
}

}  // namespace rondel::colour
