#include "calib/colour/counts.h"

#include <algorithm>
#include <utility>

namespace rondel::colour {
namespace {

/// Shows `visit` every colour that comes out of a change of light, with its count.
template <class Visit>
void each_shifted(const RgbCounts& counts, const ColourShift& shift, const Visit& visit) {
  for (const RgbCounts::Entry& entry : counts.entries) {
    const std::uint32_t draws = shift.noisy() ? std::min(entry.count, kNoiseDraws) : 1;
    std::uint32_t left = entry.count;
    for (std::uint32_t draw = 0; draw < draws; ++draw) {
      const std::uint32_t share = left / (draws - draw);
      visit(to_hsv(shift(entry.colour, draw)), share);
      left -= share;
    }
  }
}

constexpr std::size_t kHsvSlots = std::size_t{180} << 16U;

std::size_t slot(Hsv p) {
  return (static_cast<std::size_t>(p.h) << 16U) | (static_cast<std::size_t>(p.s) << 8U) | p.v;
}

template <class Counts>
std::uint64_t total_of(const Counts& counts) {
  std::uint64_t sum = 0;
  for (const auto& entry : counts.entries) sum += entry.count;
  return sum;
}

}  // namespace

std::uint64_t RgbCounts::total() const { return total_of(*this); }
std::uint64_t HsvCounts::total() const { return total_of(*this); }

RgbCounter::RgbCounter() : slots_(std::size_t{1} << 24U) {}

void RgbCounter::add(const RgbCounts& counts) {
  for (const RgbCounts::Entry& entry : counts.entries) slots_[key(entry.colour)] += entry.count;
}

RgbCounts RgbCounter::take() {
  RgbCounts counts;
  for (std::size_t k = 0; k < slots_.size(); ++k) {
    if (slots_[k] == 0) continue;
    counts.entries.push_back({{static_cast<std::uint8_t>(k >> 16U),
                               static_cast<std::uint8_t>(k >> 8U),
                               static_cast<std::uint8_t>(k)},
                              slots_[k]});
    slots_[k] = 0;
  }
  return counts;
}

HsvCounter::HsvCounter() : slots_(kHsvSlots) {}

void HsvCounter::add(const RgbCounts& counts, const ColourShift& shift) {
  each_shifted(counts, shift, [&](Hsv p, std::uint32_t count) { slots_[slot(p)] += count; });
}

void HsvCounter::add(const HsvCounts& counts) {
  for (const HsvCounts::Entry& entry : counts.entries) slots_[slot(entry.colour)] += entry.count;
}

HsvCounts HsvCounter::take() {
  HsvCounts counts;
  for (std::size_t k = 0; k < slots_.size(); ++k) {
    if (slots_[k] == 0) continue;
    counts.entries.push_back({{static_cast<std::uint8_t>(k >> 16U),
                               static_cast<std::uint8_t>(k >> 8U),
                               static_cast<std::uint8_t>(k)},
                              slots_[k]});
    slots_[k] = 0;
  }
  return counts;
}

HsvCounts shifted(const RgbCounts& counts, const ColourShift& shift) {
  std::vector<std::pair<std::uint32_t, std::uint32_t>> keyed;
  keyed.reserve(counts.entries.size());
  each_shifted(counts, shift, [&](Hsv p, std::uint32_t count) {
    keyed.emplace_back((std::uint32_t{p.h} << 16U) | (std::uint32_t{p.s} << 8U) | p.v, count);
  });
  std::sort(keyed.begin(), keyed.end());
  HsvCounts out;
  for (const auto& [key, count] : keyed) {
    const Hsv p{static_cast<std::uint8_t>(key >> 16U),
                static_cast<std::uint8_t>(key >> 8U),
                static_cast<std::uint8_t>(key)};
    if (!out.entries.empty()) {
      Hsv& last = out.entries.back().colour;
      if (last.h == p.h && last.s == p.s && last.v == p.v) {
        out.entries.back().count += count;
        continue;
      }
    }
    out.entries.push_back({p, count});
  }
  return out;
}

RgbCounts thinned(const RgbCounts& counts, std::size_t most) {
  const std::size_t n = (counts.entries.size() + most - 1) / std::max<std::size_t>(1, most);
  if (n <= 1) return counts;
  RgbCounts out;
  for (std::size_t k = 0; k < counts.entries.size(); k += n) {
    out.entries.push_back(counts.entries[k]);
    out.entries.back().count *= static_cast<std::uint32_t>(n);
  }
  return out;
}

std::uint64_t count_in(const HsvCounts& counts, const ThresholdSet& set) {
  std::uint64_t sum = 0;
  for (const HsvCounts::Entry& entry : counts.entries) {
    if (set.contains(entry.colour)) sum += entry.count;
  }
  return sum;
}

}  // namespace rondel::colour
