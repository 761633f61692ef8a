#include "vision/detect/detect.h"

#include <algorithm>
#include <array>
#include <cassert>
#include <cmath>
#include <cstring>
#include <limits>
#include <optional>

#include "calib/colour/lights.h"

namespace rondel::vision {
namespace {

/// Pixels of one class beside each other in a row.
struct Run {
  int v = 0;
  int from = 0;
  int end = 0;  ///< one past the last
  int blob = 0;
  int next = -1;  ///< another run of the same blob; -1: none
  std::uint8_t cls = 0;
};

/// Sums over a blob; merged as blobs turn out to be one.
struct Sums {
  std::int64_t area = 0;
  std::int64_t u = 0;
  std::int64_t v = 0;
  int left = std::numeric_limits<int>::max();
  int right = -1;
  int top = std::numeric_limits<int>::max();
  int bottom = -1;
  bool cut = false;
  std::uint8_t cls = 0;
  int first_run = -1;

  void add(const Sums& other) {
    area += other.area;
    u += other.u;
    v += other.v;
    left = std::min(left, other.left);
    right = std::max(right, other.right);
    top = std::min(top, other.top);
    bottom = std::max(bottom, other.bottom);
    cut |= other.cut;
  }
};

/// Disjoint sets of run labels.
class Labels {
 public:
  int fresh() {
    parent_.push_back(static_cast<int>(parent_.size()));
    return parent_.back();
  }
  int root(int label) {
    while (parent_[index(label)] != label) {
      parent_[index(label)] = parent_[index(parent_[index(label)])];
      label = parent_[index(label)];
    }
    return label;
  }
  void join(int a, int b) {
    a = root(a);
    b = root(b);
    parent_[index(std::max(a, b))] = std::min(a, b);
  }
  [[nodiscard]] std::size_t size() const { return parent_.size(); }

 private:
  static std::size_t index(int k) { return static_cast<std::size_t>(k); }
  std::vector<int> parent_;
};

/// Runs of all classes, row by row, labelled so that touching runs of a class (8-neighbours) share
/// a root.
std::vector<Run> label_runs(const colour::ClassTable& table,
                            const cv::Mat& mask,
                            const cv::Mat& bgr,
                            Labels& labels) {
  std::vector<Run> runs;
  const int width = bgr.cols;
  std::vector<std::uint8_t> classes(static_cast<std::size_t>(width) + 8, 0);
  const unsigned shift_r = 8U - static_cast<unsigned>(table.bits_r);
  const unsigned shift_g = 8U - static_cast<unsigned>(table.bits_g);
  const unsigned shift_b = 8U - static_cast<unsigned>(table.bits_b);
  const unsigned place_g = static_cast<unsigned>(table.bits_b);
  const unsigned place_r = place_g + static_cast<unsigned>(table.bits_g);
  const std::uint8_t* entries = table.classes.data();
  std::size_t row_above = 0;
  std::size_t row_start = 0;
  for (int v = 0; v < bgr.rows; ++v) {
    const auto* pixel = bgr.ptr<std::uint8_t>(v);
    const auto* open = mask.ptr<std::uint8_t>(v);
    for (int u = 0; u < width; ++u, pixel += 3) {
      const unsigned at = (static_cast<unsigned>(pixel[2] >> shift_r) << place_r) |
                          (static_cast<unsigned>(pixel[1] >> shift_g) << place_g) |
                          static_cast<unsigned>(pixel[0] >> shift_b);
      classes[static_cast<std::size_t>(u)] = entries[at] & open[u];
    }
    row_above = row_start;
    row_start = runs.size();
    std::size_t above = row_above;
    for (int u = 0; u < width;) {
      const std::uint8_t* at = classes.data() + u;
      if (*at == 0) {
        std::uint64_t eight = 0;
        std::memcpy(&eight, at, sizeof eight);
        u += eight == 0 ? 8 : 1;
        continue;
      }
      Run run{v, u, u + 1, -1, -1, *at};
      while (run.end < width && classes[static_cast<std::size_t>(run.end)] == run.cls) ++run.end;
      u = run.end;
      while (above < row_start && runs[above].end < run.from) ++above;
      for (std::size_t k = above; k < row_start && runs[k].from <= run.end; ++k) {
        if (runs[k].cls != run.cls || runs[k].v != v - 1) continue;
        if (run.blob < 0) {
          run.blob = labels.root(runs[k].blob);
        } else {
          labels.join(run.blob, runs[k].blob);
        }
      }
      if (run.blob < 0) run.blob = labels.fresh();
      runs.push_back(run);
    }
  }
  return runs;
}

/// Whether a run has a neighbour (above, below, beside) that is masked or outside the image.
bool touches_edge(const Run& run, const cv::Mat& mask) {
  if (run.v == 0 || run.v == mask.rows - 1 || run.from == 0 || run.end == mask.cols) return true;
  const auto* row = mask.ptr<std::uint8_t>(run.v);
  if (row[run.from - 1] == 0 || row[run.end] == 0) return true;
  const auto* above = mask.ptr<std::uint8_t>(run.v - 1);
  const auto* below = mask.ptr<std::uint8_t>(run.v + 1);
  for (int u = run.from; u < run.end; ++u) {
    if (above[u] == 0 || below[u] == 0) return true;
  }
  return false;
}

/// The blob's inner edge on the line from the centre to its centroid: the mean over the lines a
/// pixel beside it of the nearest pixel's near side.
ImagePoint inner_edge(const std::vector<Run>& runs,
                      int first_run,
                      ImagePoint centre,
                      ImagePoint centroid) {
  const double du = centroid.u_px - centre.u_px;
  const double dv = centroid.v_px - centre.v_px;
  const double length = std::hypot(du, dv);
  if (length < 1e-9) return centroid;
  const double cu = du / length;
  const double cv = dv / length;
  constexpr int kLines = 3;
  std::array<double, kLines> nearest{};
  nearest.fill(std::numeric_limits<double>::max());
  for (int k = first_run; k >= 0; k = runs[static_cast<std::size_t>(k)].next) {
    const Run& run = runs[static_cast<std::size_t>(k)];
    for (int u = run.from; u < run.end; ++u) {
      const double x = u - centre.u_px;
      const double y = run.v - centre.v_px;
      const double beside = y * cu - x * cv;
      const auto line = static_cast<int>(std::floor(beside + 0.5 * kLines));
      if (line < 0 || line >= kLines) continue;
      double& near = nearest[static_cast<std::size_t>(line)];
      near = std::min(near, x * cu + y * cv);
    }
  }
  double sum = 0.0;
  int lines = 0;
  for (const double near : nearest) {
    if (near == std::numeric_limits<double>::max()) continue;
    sum += near;
    ++lines;
  }
  if (lines == 0) return centroid;
  const double edge = sum / lines - 0.5;
  return {centre.u_px + edge * cu, centre.v_px + edge * cv};
}

/// Linear interpolation between pixel centres; the nearest edge outside.
cv::Vec3f sampled(const cv::Mat& bgr, double u, double v) {
  const double uu = std::clamp(u, 0.0, bgr.cols - 1.001);
  const double vv = std::clamp(v, 0.0, bgr.rows - 1.001);
  const auto u0 = static_cast<int>(uu);
  const auto v0 = static_cast<int>(vv);
  const auto fu = static_cast<float>(uu - u0);
  const auto fv = static_cast<float>(vv - v0);
  const auto at = [&](int x, int y) { return cv::Vec3f(bgr.at<cv::Vec3b>(y, x)); };
  return (1.0F - fv) * ((1.0F - fu) * at(u0, v0) + fu * at(u0 + 1, v0)) +
         fv * ((1.0F - fu) * at(u0, v0 + 1) + fu * at(u0 + 1, v0 + 1));
}

/// The inner edge to a fraction of a pixel: thresholds refuse pixels in which object and floor mix,
/// so the edge that they find lies too far out; where the colour is half way between the object's
/// and the floor's is the edge. Averaged over lines beside the one through `coarse`.
ImagePoint refined_edge(const cv::Mat& bgr, ImagePoint centre, ImagePoint coarse, double depth_px) {
  const double du = coarse.u_px - centre.u_px;
  const double dv = coarse.v_px - centre.v_px;
  const double edge = std::hypot(du, dv);
  if (edge < 8.0) return coarse;
  const double cu = du / edge;
  const double cv = dv / edge;
  constexpr double kReach = 4.0;
  constexpr double kStep = 0.25;
  constexpr int kHalf = static_cast<int>(kReach / kStep);
  std::array<cv::Vec3f, 2 * kHalf + 1> profile{};
  for (int k = -kHalf; k <= kHalf; ++k) {
    cv::Vec3f sum(0.0F, 0.0F, 0.0F);
    for (int line = -1; line <= 1; ++line) {
      const double along = edge + k * kStep;
      sum +=
          sampled(bgr, centre.u_px + along * cu - line * cv, centre.v_px + along * cv + line * cu);
    }
    profile[static_cast<std::size_t>(k + kHalf)] = sum / 3.0F;
  }
  const auto mean = [&](double from, double to) {
    cv::Vec3f sum(0.0F, 0.0F, 0.0F);
    int n = 0;
    for (int k = -kHalf; k <= kHalf; ++k) {
      if (k * kStep < from || k * kStep > to) continue;
      sum += profile[static_cast<std::size_t>(k + kHalf)];
      ++n;
    }
    return sum / static_cast<float>(n);
  };
  const double inside = std::clamp(0.6 * depth_px, 0.75, 3.0);
  const cv::Vec3f floor = mean(-kReach, -2.5);
  const cv::Vec3f object = mean(inside - 0.5, inside + 0.5);
  const cv::Vec3f apart = object - floor;
  const float square = apart.dot(apart);
  if (square < 400.0F) return coarse;  // no contrast to go by
  double last = 1.0;
  for (int k = static_cast<int>(inside / kStep); k >= -kHalf; --k) {
    const double share = (profile[static_cast<std::size_t>(k + kHalf)] - floor).dot(apart) / square;
    if (share < 0.5) {
      const double at = edge + (k + (0.5 - share) / (last - share)) * kStep;
      return {centre.u_px + at * cu, centre.v_px + at * cv};
    }
    last = share;
  }
  return coarse;
}

/// Whether a blob's area fits the object at the range where it is seen. A ball's outline is known;
/// of a box or post only the width is, so that bounds are wide. What is cut or half hidden is
/// small.
bool size_fits(const DetectorSetup& setup, const ObjectSpec& object, const Blob& blob) {
  if (setup.map == nullptr || object.diameter_m <= 0.0) return true;
  const double height_m = object.seen_height_m();
  const double radius_m = 0.5 * object.diameter_m;
  const auto spot = setup.map->floor_at(blob.measured, height_m);
  if (!spot) return true;  // out of the curve's domain: the mask's business
  if (spot->range_m <= radius_m) return true;
  const auto distance = [](ImagePoint a, ImagePoint b) {
    return std::hypot(a.u_px - b.u_px, a.v_px - b.v_px);
  };
  const double half_rad = std::asin(std::min(1.0, radius_m / spot->range_m));
  const auto left = setup.map->pixel_of({spot->range_m, spot->bearing_rad + half_rad}, height_m);
  const auto right = setup.map->pixel_of({spot->range_m, spot->bearing_rad - half_rad}, height_m);
  if (!left || !right) return true;
  const double across_px = distance(*left, *right);
  const double slack_px = 8.0;
  if (object.shape != Shape::ball) {
    const double square = across_px * across_px;
    return blob.area_px <= 8.0 * square + slack_px && blob.area_px + slack_px >= 0.02 * square;
  }
  // The outline is a circle across the line of sight, whose slope two heights tell.
  const auto lower = setup.map->floor_at(blob.measured, 0.0);
  if (!lower) return true;
  const double slope = lower->range_m - spot->range_m;  // over a drop of height_m
  const double norm = std::hypot(slope, height_m);
  if (norm <= 0.0) return true;
  const double along_m = radius_m * height_m / norm;
  const double up_m = radius_m * slope / norm;
  const auto near =
      setup.map->pixel_of({spot->range_m - along_m, spot->bearing_rad}, height_m - up_m);
  const auto far =
      setup.map->pixel_of({spot->range_m + along_m, spot->bearing_rad}, height_m + up_m);
  if (!near || !far) return true;
  const double expected = 0.25 * 3.14159265358979 * across_px * distance(*near, *far);
  return blob.area_px <= 2.5 * expected + slack_px && blob.area_px + slack_px >= 0.1 * expected;
}

/// sRGB's curve (IEC 61966-2-1) for 8 bits, to linear light 0..1.
const std::array<float, 256>& linear_light() {
  static const auto table = [] {
    std::array<float, 256> t{};
    for (std::size_t k = 0; k < t.size(); ++k) {
      t[k] = static_cast<float>(colour::linear_from_srgb(static_cast<double>(k) / 255.0));
    }
    return t;
  }();
  return table;
}

cv::Vec3f linear(const cv::Vec3b& bgr) {
  const std::array<float, 256>& table = linear_light();
  return {table[bgr[0]], table[bgr[1]], table[bgr[2]]};
}

/// The centroid with border pixels weighted by purity. The object's colour is the mean of the
/// pixels inside the border, the background's that of the pixels two steps outside nearby. A pixel
/// that is no mix of the two (another object, a line on the floor) counts as the class table has
/// it.
ImagePoint pure_centroid(const cv::Mat& bgr,
                         const cv::Mat& mask,
                         const std::vector<Run>& runs,
                         int first_run,
                         const cv::Rect& box) {
  constexpr int kRim = 3;
  const cv::Rect around =
      cv::Rect(box.x - kRim, box.y - kRim, box.width + 2 * kRim, box.height + 2 * kRim) &
      cv::Rect({}, bgr.size());
  // 2: inside, 1: the blob's border, 0: outside.
  const int stride = around.width + 2;
  std::vector<std::uint8_t> state(static_cast<std::size_t>(stride * (around.height + 2)), 0);
  const auto at = [&](int u, int v) {
    return static_cast<std::size_t>((v - around.y + 1) * stride + (u - around.x + 1));
  };
  for (int k = first_run; k >= 0; k = runs[static_cast<std::size_t>(k)].next) {
    const Run& run = runs[static_cast<std::size_t>(k)];
    std::fill_n(state.begin() + static_cast<std::ptrdiff_t>(at(run.from, run.v)),
                run.end - run.from,
                std::uint8_t{1});
  }
  const auto width = static_cast<std::size_t>(stride);
  cv::Vec3f own;
  float count = 0.0F;
  cv::Vec3f border;
  float border_count = 0.0F;
  for (int v = box.y; v < box.y + box.height; ++v) {
    for (int u = box.x; u < box.x + box.width; ++u) {
      const std::size_t k = at(u, v);
      if (state[k] == 0) continue;
      const bool inside =
          state[k - 1] != 0 && state[k + 1] != 0 && state[k - width] != 0 && state[k + width] != 0;
      if (inside) state[k] = 2;
      (inside ? own : border) += linear(bgr.at<cv::Vec3b>(v, u));
      (inside ? count : border_count) += 1.0F;
    }
  }
  if (count == 0.0F) {
    own = border;
    count = border_count;
  }
  own *= 1.0F / count;

  // Pixels of the blob and all their neighbours.
  std::vector<std::uint8_t> beside(state.size(), 0);
  for (int v = box.y; v < box.y + box.height; ++v) {
    for (int u = box.x; u < box.x + box.width; ++u) {
      const std::size_t k = at(u, v);
      if (state[k] == 0) continue;
      for (const std::size_t row : {k - width, k, k + width}) {
        beside[row - 1] = beside[row] = beside[row + 1] = 1;
      }
    }
  }
  // The background near (u, v): pixels that are neither the blob nor next to it.
  const auto background = [&](int u, int v) -> std::optional<cv::Vec3f> {
    cv::Vec3f sum;
    float n = 0.0F;
    for (int y = std::max(around.y, v - 2); y <= std::min(around.y + around.height - 1, v + 2);
         ++y) {
      for (int x = std::max(around.x, u - 2); x <= std::min(around.x + around.width - 1, u + 2);
           ++x) {
        if (mask.at<std::uint8_t>(y, x) == 0 || beside[at(x, y)] != 0) continue;
        sum += linear(bgr.at<cv::Vec3b>(y, x));
        n += 1.0F;
      }
    }
    if (n == 0.0F) return std::nullopt;
    return sum * (1.0F / n);
  };
  const auto purity = [&](int u, int v, float otherwise) {
    const auto behind = background(u, v);
    if (!behind) return otherwise;
    const cv::Vec3f full = own - *behind;
    const cv::Vec3f here = linear(bgr.at<cv::Vec3b>(v, u)) - *behind;
    const float square = full.dot(full);
    if (square <= 0.0F) return otherwise;
    const float share = here.dot(full) / square;
    const cv::Vec3f rest = here - share * full;
    if (rest.dot(rest) > 0.09F * square) return otherwise;
    return std::clamp(share, 0.0F, 1.0F);
  };
  double sum = 0.0;
  double sum_u = 0.0;
  double sum_v = 0.0;
  for (int v = std::max(around.y, box.y - 1);
       v < std::min(around.y + around.height, box.y + box.height + 1);
       ++v) {
    for (int u = std::max(around.x, box.x - 1);
         u < std::min(around.x + around.width, box.x + box.width + 1);
         ++u) {
      const std::uint8_t here = state[at(u, v)];
      if (here == 0 && (mask.at<std::uint8_t>(v, u) == 0 || beside[at(u, v)] == 0)) continue;
      const auto weight =
          static_cast<double>(here == 2 ? 1.0F : purity(u, v, here == 0 ? 0.0F : 1.0F));
      sum += weight;
      sum_u += weight * u;
      sum_v += weight * v;
    }
  }
  return {sum_u / sum, sum_v / sum};
}

}  // namespace

std::vector<Blob> detect(const DetectorSetup& setup, const cv::Mat& bgr) {
  assert(bgr.type() == CV_8UC3 && setup.mask.type() == CV_8U && setup.mask.size() == bgr.size());
  Labels labels;
  std::vector<Run> runs = label_runs(setup.table, setup.mask, bgr, labels);
  std::vector<int> blob_of(labels.size());
  std::vector<Sums> sums(labels.size());
  for (std::size_t k = 0; k < labels.size(); ++k) blob_of[k] = labels.root(static_cast<int>(k));
  for (std::size_t r = 0; r < runs.size(); ++r) {
    Run& run = runs[r];
    Sums& sum = sums[static_cast<std::size_t>(blob_of[static_cast<std::size_t>(run.blob)])];
    const std::int64_t length = run.end - run.from;
    Sums one;
    one.area = length;
    one.u = length * (run.from + run.end - 1) / 2;
    one.v = length * run.v;
    one.left = run.from;
    one.right = run.end - 1;
    one.top = run.v;
    one.bottom = run.v;
    one.cut = !sum.cut && touches_edge(run, setup.mask);
    sum.cls = run.cls;
    sum.add(one);
    run.next = sum.first_run;
    sum.first_run = static_cast<int>(r);
  }
  std::vector<Blob> blobs;
  for (std::size_t k = 0; k < sums.size(); ++k) {
    const Sums& sum = sums[k];
    if (sum.area < setup.least_area_px || sum.cls > setup.objects.size()) continue;
    Blob blob;
    blob.object = sum.cls - 1;
    const auto area = static_cast<double>(sum.area);
    blob.plain_centroid = {static_cast<double>(sum.u) / area, static_cast<double>(sum.v) / area};
    blob.centroid = blob.plain_centroid;
    blob.area_px = static_cast<int>(sum.area);
    blob.box = {sum.left, sum.top, sum.right - sum.left + 1, sum.bottom - sum.top + 1};
    blob.cut_by_mask = sum.cut;
    const ObjectSpec& object = setup.objects[static_cast<std::size_t>(blob.object)];
    const bool ball = object.shape == Shape::ball;
    blob.measured =
        ball ? blob.centroid : inner_edge(runs, sum.first_run, setup.centre, blob.centroid);
    if (!size_fits(setup, object, blob)) continue;
    blob.centroid = pure_centroid(bgr, setup.mask, runs, sum.first_run, blob.box);
    if (ball) {
      blob.measured = blob.centroid;
    } else {
      const double depth = 2.0 * std::hypot(blob.plain_centroid.u_px - blob.measured.u_px,
                                            blob.plain_centroid.v_px - blob.measured.v_px);
      blob.measured = refined_edge(bgr, setup.centre, blob.measured, depth);
    }
    blobs.push_back(blob);
  }
  std::stable_sort(blobs.begin(), blobs.end(), [](const Blob& a, const Blob& b) {
    return a.object != b.object ? a.object < b.object : a.area_px > b.area_px;
  });
  return blobs;
}

}  // namespace rondel::vision
