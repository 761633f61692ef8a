#include "calib/colour/class_table.h"

#include "calib/colour/hsv.h"

namespace rondel::colour {

ClassTable make_class_table(std::span<const ThresholdSet> sets) {
  ClassTable table;
  table.classes.resize(65536);
  for (unsigned value = 0; value < 65536; ++value) {
    const Hsv p = to_hsv(from_rgb565(value));
    for (std::size_t k = 0; k < sets.size(); ++k) {
      if (!sets[k].contains(p)) continue;
      table.classes[value] = static_cast<std::uint8_t>(k + 1);
      break;
    }
  }
  return table;
}

}  // namespace rondel::colour
