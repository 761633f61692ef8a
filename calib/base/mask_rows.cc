#include "calib/base/mask_rows.h"

#include <algorithm>
#include <cassert>
#include <cmath>
#include <numbers>

#include "calib/base/problem.h"

namespace rondel {
namespace {

constexpr std::uint8_t kSameRow = 255;
constexpr int kMore = 255;

std::size_t sector_of(double du, double dv, std::size_t sectors) {
  const double turn = std::atan2(dv, du) / (2.0 * std::numbers::pi);
  const auto n = static_cast<double>(sectors);
  return static_cast<std::size_t>(std::lround((turn < 0.0 ? turn + 1.0 : turn) * n)) % sectors;
}

}  // namespace

MaskRows rows_of(std::span<const std::uint8_t> mask, int width_px) {
  assert(width_px > 0 && mask.size() % static_cast<std::size_t>(width_px) == 0);
  MaskRows rows;
  rows.width_px = width_px;
  const auto width = static_cast<std::size_t>(width_px);
  for (std::size_t start = 0; start < mask.size(); start += width) {
    std::vector<int>& changes = rows.changes.emplace_back();
    bool visible = false;
    for (std::size_t u = 0; u < width; ++u) {
      if ((mask[start + u] != 0) == visible) continue;
      visible = !visible;
      changes.push_back(static_cast<int>(u));
    }
  }
  return rows;
}

std::vector<std::uint8_t> mask_of(const MaskRows& rows) {
  const auto width = static_cast<std::size_t>(rows.width_px);
  std::vector<std::uint8_t> mask(width * rows.changes.size(), 0);
  for (std::size_t row = 0; row < rows.changes.size(); ++row) {
    const std::vector<int>& changes = rows.changes[row];
    for (std::size_t k = 0; k < changes.size(); k += 2) {
      const int end = k + 1 < changes.size() ? changes[k + 1] : rows.width_px;
      std::fill(mask.begin() + static_cast<std::ptrdiff_t>(row * width) + changes[k],
                mask.begin() + static_cast<std::ptrdiff_t>(row * width) + end,
                std::uint8_t{255});
    }
  }
  return mask;
}

std::vector<std::uint8_t> pack_rows(const MaskRows& rows) {
  std::vector<std::uint8_t> bytes;
  for (std::size_t row = 0; row < rows.changes.size(); ++row) {
    const std::vector<int>& changes = rows.changes[row];
    if (row > 0 && changes == rows.changes[row - 1]) {
      bytes.push_back(kSameRow);
      continue;
    }
    if (changes.size() >= kSameRow) {
      throw InputError("mask", "a row changes more than 254 times; smooth it by strokes");
    }
    bytes.push_back(static_cast<std::uint8_t>(changes.size()));
    int before = 0;
    for (const int at : changes) {
      int step = at - before;
      for (; step >= kMore; step -= kMore) bytes.push_back(kMore);
      bytes.push_back(static_cast<std::uint8_t>(step));
      before = at;
    }
  }
  return bytes;
}

MaskRows unpack_rows(std::span<const std::uint8_t> bytes, int width_px, int height_px) {
  const auto damaged = [] { return InputError("mask rows", "are damaged; make the tables again"); };
  MaskRows rows;
  rows.width_px = width_px;
  std::size_t next = 0;
  const auto take = [&] {
    if (next == bytes.size()) throw damaged();
    return bytes[next++];
  };
  for (int row = 0; row < height_px; ++row) {
    const std::uint8_t count = take();
    if (count == kSameRow) {
      if (row == 0) throw damaged();
      rows.changes.push_back(std::vector<int>(rows.changes.back()));
      continue;
    }
    std::vector<int>& changes = rows.changes.emplace_back();
    int at = 0;
    for (int k = 0; k < count; ++k) {
      int step = 0;
      for (std::uint8_t part = take();; part = take()) {
        step += part;
        if (part != kMore) break;
      }
      at += step;
      if (at >= width_px || (k > 0 && step == 0)) throw damaged();
      changes.push_back(at);
    }
  }
  if (next != bytes.size()) throw damaged();
  return rows;
}

VisibleRadii visible_radii(std::span<const std::uint8_t> mask,
                           int width_px,
                           ImagePoint centre,
                           int sectors) {
  const auto count = static_cast<std::size_t>(sectors);
  // Per sector and whole radius: 0 no pixel, 1 all visible, 2 some hidden.
  std::vector<std::vector<char>> state(count);
  for (std::size_t i = 0; i < mask.size(); ++i) {
    const auto width = static_cast<std::size_t>(width_px);
    const double du = static_cast<double>(i % width) - centre.u_px;
    const double dv = static_cast<double>(i / width) - centre.v_px;
    const auto radius = static_cast<std::size_t>(std::hypot(du, dv));
    auto& along = state[sector_of(du, dv, count)];
    if (along.size() <= radius) along.resize(radius + 1, 0);
    if (mask[i] == 0) {
      along[radius] = 2;
    } else if (along[radius] == 0) {
      along[radius] = 1;
    }
  }
  VisibleRadii radii;
  radii.centre = centre;
  for (const auto& along : state) {
    std::size_t best = 0;
    std::size_t best_from = 0;
    std::size_t from = 0;
    for (std::size_t r = 0; r <= along.size(); ++r) {
      if (r < along.size() && along[r] != 2) continue;
      if (r - from > best) {
        best = r - from;
        best_from = from;
      }
      from = r + 1;
    }
    radii.inner_px.push_back(static_cast<std::uint16_t>(best_from));
    radii.outer_px.push_back(static_cast<std::uint16_t>(best_from + best));
  }
  return radii;
}

bool shows(const VisibleRadii& radii, int u_px, int v_px) {
  const double du = u_px - radii.centre.u_px;
  const double dv = v_px - radii.centre.v_px;
  const std::size_t sector = sector_of(du, dv, radii.inner_px.size());
  const auto radius = static_cast<std::size_t>(std::hypot(du, dv));
  return radius >= radii.inner_px[sector] && radius < radii.outer_px[sector];
}

}  // namespace rondel
