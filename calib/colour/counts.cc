#include "calib/colour/counts.h"

#include <algorithm>
#include <utility>

namespace rondel::colour {
namespace {

constexpr std::size_t kHsvSlots = std::size_t{180} << 16U;

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
  for (const RgbCounts::Entry& entry : counts.entries) {
    const Hsv p = to_hsv(shift(entry.colour));
    slots_[(static_cast<std::size_t>(p.h) << 16U) | (static_cast<std::size_t>(p.s) << 8U) | p.v] +=
        entry.count;
  }
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
  for (const RgbCounts::Entry& entry : counts.entries) {
    const Hsv p = to_hsv(shift(entry.colour));
    keyed.emplace_back((std::uint32_t{p.h} << 16U) | (std::uint32_t{p.s} << 8U) | p.v, entry.count);
  }
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

std::uint64_t count_in(const HsvCounts& counts, const ThresholdSet& set) {
  std::uint64_t sum = 0;
  for (const HsvCounts::Entry& entry : counts.entries) {
    if (set.contains(entry.colour)) sum += entry.count;
  }
  return sum;
}

}  // namespace rondel::colour
