#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cstddef>
#include <optional>

#include "calib/base/problem.h"
#include "calib/link/build_tables.h"
#include "calib/link/picture.h"

namespace rondel::link {

std::vector<MaskRun> mask_runs(std::span<const std::uint8_t> mask, int width_px, int height_px) {
  std::vector<MaskRun> runs;
  if (mask.empty()) return runs;
  for (int v = 0; v < height_px; ++v) {
    for (int u = 0; u < width_px; ++u) {
      if (mask[zu(v) * zu(width_px) + zu(u)] == 0) continue;
      const int from = u;
      while (u < width_px && mask[zu(v) * zu(width_px) + zu(u)] != 0) ++u;
      runs.push_back({static_cast<std::uint16_t>(v),
                      static_cast<std::uint16_t>(from),
                      static_cast<std::uint16_t>(u)});
    }
  }
  return runs;
}

colour::ClassTable fit_class_table(const colour::ClassTable& table,
                                   int objects,
                                   int bytes,
                                   const std::string& where) {
  BoardTables sizes;
  sizes.objects.resize(zu(objects));
  const int bits = class_bits(sizes);
  // Halves one channel; each entry's class by majority of the two, the lower one on a tie.
  const auto reduce = [](const colour::ClassTable& from,
                         int channel,
                         std::vector<std::array<std::uint16_t, 256>>& votes) {
    colour::ClassTable to = from;
    int& b = channel == 0 ? to.bits_r : channel == 1 ? to.bits_g : to.bits_b;
    --b;
    const int drop = channel == 0 ? from.bits_g + from.bits_b : channel == 1 ? from.bits_b : 0;
    std::vector<std::array<std::uint16_t, 256>> merged(votes.size() / 2);
    for (std::size_t i = 0; i < votes.size(); ++i) {
      const std::size_t low = i & ((std::size_t{1} << drop) - 1);
      const std::size_t at = (i >> (drop + 1) << drop) | low;
      for (std::size_t k = 0; k < 256; ++k) {
        merged[at][k] = static_cast<std::uint16_t>(merged[at][k] + votes[i][k]);
      }
    }
    votes.swap(merged);
    return to;
  };
  colour::ClassTable best = table;
  if (static_cast<int>(best.classes.size()) * bits / 8 <= bytes) return best;
  std::vector<std::array<std::uint16_t, 256>> votes(table.classes.size());
  for (std::size_t i = 0; i < votes.size(); ++i) votes[i][table.classes[i]] = 1;
  const auto kept = [](const std::vector<std::array<std::uint16_t, 256>>& v) {
    std::size_t sum = 0;
    for (const auto& vote : v) sum += *std::max_element(vote.begin(), vote.end());
    return sum;
  };
  while (static_cast<int>(votes.size()) * bits / 8 > bytes) {
    std::optional<colour::ClassTable> chosen;
    std::vector<std::array<std::uint16_t, 256>> chosen_votes;
    std::size_t most = 0;
    for (int channel = 0; channel < 3; ++channel) {
      const int left = channel == 0 ? best.bits_r : channel == 1 ? best.bits_g : best.bits_b;
      if (left <= 1) continue;
      std::vector<std::array<std::uint16_t, 256>> trial = votes;
      const colour::ClassTable reduced = reduce(best, channel, trial);
      const std::size_t agree = kept(trial);
      if (chosen && agree <= most) continue;
      most = agree;
      chosen = reduced;
      chosen_votes.swap(trial);
    }
    if (!chosen) {
      throw InputError(
          where,
          fmt::format("budget.colour_bytes = {}: too small for any class table; set at least {}",
                      bytes,
                      8 * bits / 8));
    }
    best = *chosen;
    votes.swap(chosen_votes);
  }
  best.classes.resize(votes.size());
  for (std::size_t i = 0; i < votes.size(); ++i) {
    best.classes[i] = static_cast<std::uint8_t>(std::max_element(votes[i].begin(), votes[i].end()) -
                                                votes[i].begin());
  }
  return best;
}

}  // namespace rondel::link
