#include "calib/colour/class_table.h"

#include <algorithm>
#include <array>
#include <cassert>

#include "calib/colour/hsv.h"

namespace rondel::colour {
namespace {

constexpr unsigned kColours = 65536;

std::uint8_t class_of(const ClassTable& table, unsigned rgb565) {
  const Rgb p = from_rgb565(rgb565);
  return table.at(p.r, p.g, p.b);
}

std::uint64_t weight(std::span<const std::uint64_t> weights, unsigned rgb565) {
  return weights.empty() ? 1 : weights[rgb565];
}

}  // namespace

ClassTable make_class_table(std::span<const ThresholdSet> sets) {
  ClassTable table;
  table.classes.resize(kColours);
  for (unsigned value = 0; value < kColours; ++value) {
    const Hsv p = to_hsv(from_rgb565(value));
    for (std::size_t k = 0; k < sets.size(); ++k) {
      if (!sets[k].contains(p)) continue;
      table.classes[value] = static_cast<std::uint8_t>(k + 1);
      break;
    }
  }
  return table;
}

ClassTable coarser(const ClassTable& table,
                   int bits_r,
                   int bits_g,
                   int bits_b,
                   std::span<const std::uint64_t> weights) {
  assert(weights.empty() || weights.size() == kColours);
  ClassTable out;
  out.bits_r = std::min(bits_r, table.bits_r);
  out.bits_g = std::min(bits_g, table.bits_g);
  out.bits_b = std::min(bits_b, table.bits_b);
  const std::size_t size = std::size_t{1}
                           << static_cast<unsigned>(out.bits_r + out.bits_g + out.bits_b);
  // Votes of colours by pixels seen; colours never seen decide where no pixel does.
  std::vector<std::array<std::uint64_t, 64>> votes(size);
  std::vector<std::array<std::uint32_t, 64>> colours(size);
  const unsigned drop_r = static_cast<unsigned>(5 - out.bits_r);
  const unsigned drop_g = static_cast<unsigned>(6 - out.bits_g);
  const unsigned drop_b = static_cast<unsigned>(5 - out.bits_b);
  for (unsigned value = 0; value < kColours; ++value) {
    const unsigned r = (value >> 11U) >> drop_r;
    const unsigned g = ((value >> 5U) & 63U) >> drop_g;
    const unsigned b = (value & 31U) >> drop_b;
    const std::size_t at =
        (((r << static_cast<unsigned>(out.bits_g)) | g) << static_cast<unsigned>(out.bits_b)) | b;
    const std::uint8_t cls = class_of(table, value);
    assert(cls < 64);
    votes[at][cls] += weight(weights, value);
    ++colours[at][cls];
  }
  out.classes.resize(size);
  for (std::size_t k = 0; k < size; ++k) {
    std::size_t best = 0;
    for (std::size_t c = 1; c < votes[k].size(); ++c) {
      if (votes[k][c] > votes[k][best] ||
          (votes[k][c] == votes[k][best] && colours[k][c] > colours[k][best])) {
        best = c;
      }
    }
    out.classes[k] = static_cast<std::uint8_t>(best);
  }
  return out;
}

double disagreement(const ClassTable& a,
                    const ClassTable& b,
                    std::span<const std::uint64_t> weights) {
  std::uint64_t different = 0;
  std::uint64_t all = 0;
  for (unsigned value = 0; value < kColours; ++value) {
    const std::uint64_t here = weight(weights, value);
    all += here;
    if (class_of(a, value) != class_of(b, value)) different += here;
  }
  return all == 0 ? 0.0 : static_cast<double>(different) / static_cast<double>(all);
}

ClassTable smallest_class_table(const ClassTable& table,
                                double most,
                                std::span<const std::uint64_t> weights) {
  for (int bits = 6; bits < table.bits_r + table.bits_g + table.bits_b; ++bits) {
    ClassTable best;
    double least = 2.0;
    for (int r = 2; r <= table.bits_r; ++r) {
      for (int g = 2; g <= table.bits_g; ++g) {
        const int b = bits - r - g;
        if (b < 2 || b > table.bits_b) continue;
        ClassTable candidate = coarser(table, r, g, b, weights);
        const double here = disagreement(table, candidate, weights);
        if (here >= least) continue;
        least = here;
        best = std::move(candidate);
      }
    }
    if (least <= most) return best;
  }
  return table;
}

}  // namespace rondel::colour
