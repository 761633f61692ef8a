#include "vision/swatch/collect.h"

#include <algorithm>
#include <array>
#include <map>
#include <opencv2/imgproc.hpp>

#include "calib/colour/counts.h"
#include "calib/colour/hsv.h"
#include "vision/swatch/cover.h"
#include "vision/swatch/noise.h"

namespace rondel::vision {
namespace {

using colour::Hsv;
using colour::Rgb;

Rgb rgb(const cv::Vec3b& bgr) { return {bgr[2], bgr[1], bgr[0]}; }

/// Where one object's pixels lie in HSV in one light: cells that its swatches fill, and a wider
/// neighbourhood without regard to brightness.
class ColourCore {
 public:
  ColourCore() : dense_(kHues * kBytes * kBytes, 0), wide_(kHues * kBytes, 0) {}

  void add(Hsv p) {
    ++dense_[cell(p)];
    ++total_;
  }
  /// No more pixels come.
  void close() {
    const std::uint32_t least = std::max<std::uint32_t>(1, total_ / 400);
    std::vector<char> filled(dense_.size(), 0);
    for (std::size_t k = 0; k < dense_.size(); ++k) filled[k] = dense_[k] >= least ? 1 : 0;
    core_.assign(dense_.size(), 0);
    const auto each_filled = [&](const auto& visit) {
      for (int h = 0; h < kHues; ++h) {
        for (int s = 0; s < kBytes; ++s) {
          for (int v = 0; v < kBytes; ++v) {
            if (filled[at(h, s, v)] != 0) visit(h, s, v);
          }
        }
      }
    };
    each_filled([&](int h, int s, int v) {
      for (int dh = -1; dh <= 1; ++dh) {
        for (int ds = -1; ds <= 1; ++ds) {
          for (int dv = -1; dv <= 1; ++dv) {
            const int ss = s + ds;
            const int vv = v + dv;
            if (ss < 0 || ss >= kBytes || vv < 0 || vv >= kBytes) continue;
            const int hh = (h + dh + kHues) % kHues;
            core_[at(hh, ss, vv)] = 1;
            wide_[static_cast<std::size_t>(hh * kBytes + ss)] = 1;
          }
        }
      }
    });
  }
  [[nodiscard]] bool in_core(Hsv p) const { return !core_.empty() && core_[cell(p)] != 0; }
  [[nodiscard]] bool in_wide(Hsv p) const {
    return total_ > 0 && wide_[static_cast<std::size_t>(p.h / 5 * kBytes + p.s / 16)] != 0;
  }

 private:
  static constexpr int kHues = 36;   // cells of 5 levels
  static constexpr int kBytes = 16;  // cells of 16 levels
  static std::size_t at(int h, int s, int v) {
    return static_cast<std::size_t>((h * kBytes + s) * kBytes + v);
  }
  static std::size_t cell(Hsv p) { return at(p.h / 5, p.s / 16, p.v / 16); }
  std::vector<std::uint32_t> dense_;
  std::vector<char> wide_;
  std::vector<char> core_;
  std::uint32_t total_ = 0;
};

struct Painted {
  const Frame* frame = nullptr;
  std::vector<cv::Mat> whole;  ///< one an object, CV_8U; empty: no swatch
  std::vector<cv::Mat> inner;
  cv::Mat surroundings;  ///< explicit ones; may be empty
};

void unite(cv::Mat& all, const cv::Mat& more) {
  if (all.empty()) {
    all = more.clone();
  } else {
    all |= more;
  }
}

std::vector<Painted> paint(const std::vector<Frame>& frames,
                           const std::vector<Swatch>& swatches,
                           const std::vector<ObjectSpec>& objects,
                           const cv::Mat& mask,
                           Progress& progress) {
  std::map<std::string, std::size_t> frame_of;
  for (std::size_t f = 0; f < frames.size(); ++f) frame_of[frames[f].image] = f;
  std::map<std::size_t, Painted> painted;
  int done = 0;
  for (const Swatch& swatch : swatches) {
    progress.at("swatches", ++done, static_cast<int>(swatches.size()));
    const auto found = frame_of.find(swatch.image);
    if (found == frame_of.end()) continue;
    Painted& one = painted[found->second];
    one.frame = &frames[found->second];
    one.whole.resize(objects.size());
    one.inner.resize(objects.size());
    const Cover area = cover(swatch.region, one.frame->bgr, mask);
    if (swatch.label == kSurroundings) {
      unite(one.surroundings, area.whole);
      continue;
    }
    for (std::size_t o = 0; o < objects.size(); ++o) {
      if (objects[o].name != swatch.label) continue;
      unite(one.whole[o], area.whole);
      unite(one.inner[o], area.inner);
    }
  }
  std::vector<Painted> in_order;
  for (auto& [frame, one] : painted) in_order.push_back(std::move(one));
  return in_order;
}

template <class Visit>
void each_pixel(const cv::Mat& area, const cv::Mat& bgr, const Visit& visit) {
  for (int v = 0; v < bgr.rows; ++v) {
    const auto* in = area.ptr<unsigned char>(v);
    const auto* row = bgr.ptr<cv::Vec3b>(v);
    for (int u = 0; u < bgr.cols; ++u) {
      if (in[u] != 0) visit(u, v, rgb(row[u]));
    }
  }
}

constexpr int kLeastLookAlikePx = 8;
/// A patch more than so many times as large as the largest labelled one is no object.
constexpr int kLargestOverLabelled = 30;

/// Patches of object `o`'s colours in one frame. What belongs to an object is added to `left_out`.
void find_look_alikes(const Painted& one,
                      std::size_t o,
                      const ColourCore& core,
                      int largest_px,
                      const cv::Mat& mask,
                      cv::Mat& left_out,
                      std::vector<LookAlike>& found) {
  cv::Mat like(mask.size(), CV_8U, cv::Scalar(0));
  cv::Mat tight(mask.size(), CV_8U, cv::Scalar(0));
  each_pixel(mask, one.frame->bgr, [&](int u, int v, Rgb p) {
    const Hsv colour = to_hsv(p);
    if (!core.in_wide(colour)) return;
    like.at<unsigned char>(v, u) = 255;
    if (core.in_core(colour)) tight.at<unsigned char>(v, u) = 255;
  });
  cv::Mat labels;
  cv::Mat stats;
  cv::Mat centroids;
  const int count = cv::connectedComponentsWithStats(like, labels, stats, centroids, 8);
  std::vector<int> tight_px(static_cast<std::size_t>(count), 0);
  std::vector<char> touches(static_cast<std::size_t>(count), 0);
  std::vector<int> explained(static_cast<std::size_t>(count), 0);
  for (int v = 0; v < mask.rows; ++v) {
    for (int u = 0; u < mask.cols; ++u) {
      const auto label = static_cast<std::size_t>(labels.at<int>(v, u));
      if (label == 0) continue;
      tight_px[label] += tight.at<unsigned char>(v, u) != 0 ? 1 : 0;
      if (!one.whole[o].empty() && one.whole[o].at<unsigned char>(v, u) != 0) touches[label] = 1;
      if (!one.surroundings.empty() && one.surroundings.at<unsigned char>(v, u) != 0) {
        ++explained[label];
      }
    }
  }
  std::vector<char> out(static_cast<std::size_t>(count), 0);
  for (int label = 1; label < count; ++label) {
    const auto k = static_cast<std::size_t>(label);
    const int area = stats.at<int>(label, cv::CC_STAT_AREA);
    if (area > kLargestOverLabelled * largest_px || 4 * tight_px[k] < area) continue;
    if (touches[k] != 0) {
      out[k] = 1;
    } else if (area >= kLeastLookAlikePx && 2 * explained[k] < area) {
      out[k] = 1;
      found.push_back({one.frame->image,
                       static_cast<int>(o),
                       {centroids.at<double>(label, 0), centroids.at<double>(label, 1)},
                       area});
    }
  }
  for (int v = 0; v < mask.rows; ++v) {
    for (int u = 0; u < mask.cols; ++u) {
      if (out[static_cast<std::size_t>(labels.at<int>(v, u))] != 0) {
        left_out.at<unsigned char>(v, u) = 255;
      }
    }
  }
}

}  // namespace

Labelled collect(const std::vector<Frame>& frames,
                 const std::vector<Swatch>& swatches,
                 const std::vector<ObjectSpec>& objects,
                 const cv::Mat& mask,
                 Progress& progress) {
  const std::vector<Painted> painted = paint(frames, swatches, objects, mask, progress);
  std::map<std::string, std::vector<const Painted*>> by_light;
  for (const Painted& one : painted) by_light[one.frame->light].push_back(&one);
  const cv::Mat near = cv::getStructuringElement(cv::MORPH_ELLIPSE, {7, 7});
  Labelled labelled;
  colour::RgbCounter counter;
  int done = 0;
  for (const auto& [light, ones] : by_light) {
    progress.at("surroundings", ++done, static_cast<int>(by_light.size()));
    colour::LightSamples samples;
    samples.light = light;
    std::vector<ColourCore> cores(objects.size());
    std::vector<int> largest(objects.size(), 0);
    std::vector<int> pixels(objects.size(), 0);
    for (std::size_t o = 0; o < objects.size(); ++o) {
      for (const Painted* one : ones) {
        if (one->inner[o].empty()) continue;
        each_pixel(one->inner[o], one->frame->bgr, [&](int, int, Rgb p) {
          counter.add(p);
          cores[o].add(to_hsv(p));
          ++pixels[o];
        });
        largest[o] = std::max(largest[o], cv::countNonZero(one->whole[o]));
      }
      cores[o].close();
      samples.objects.push_back(counter.take());
    }
    for (const Painted* one : ones) {
      cv::Mat left_out(mask.size(), CV_8U, cv::Scalar(0));
      for (std::size_t o = 0; o < objects.size(); ++o) {
        if (!one->whole[o].empty()) left_out |= one->whole[o];
        if (pixels[o] == 0) continue;
        find_look_alikes(*one, o, cores[o], largest[o], mask, left_out, labelled.look_alikes);
      }
      cv::dilate(left_out, left_out, near);
      cv::Mat around = mask & ~left_out;
      if (!one->surroundings.empty()) around |= one->surroundings;
      each_pixel(around, one->frame->bgr, [&](int, int, Rgb p) { counter.add(p); });
    }
    samples.surroundings = counter.take();
    std::vector<cv::Mat> images;
    for (const Painted* one : ones) images.push_back(one->frame->bgr);
    samples.noise = noise_of(images, mask);
    labelled.lights.push_back(std::move(samples));
    labelled.swatch_pixels.push_back(std::move(pixels));
  }
  std::stable_sort(labelled.look_alikes.begin(),
                   labelled.look_alikes.end(),
                   [](const LookAlike& a, const LookAlike& b) { return a.area_px > b.area_px; });
  return labelled;
}

}  // namespace rondel::vision
