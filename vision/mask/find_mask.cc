#include "vision/mask/find_mask.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <map>
#include <numbers>
#include <opencv2/imgproc.hpp>

namespace rondel::vision {
namespace {

/// Grey level and red minus blue: noise in the two is nearly independent.
constexpr std::size_t kFeatures = 2;

/// A frame's features in the order of the pixels inside the rim.
struct View {
  std::array<std::vector<float>, kFeatures> at;
};

/// The distinct views of one light, and what is known of them.
struct Group {
  std::vector<View> views;
  std::array<std::vector<float>, kFeatures> middle;  ///< per pixel: median over the views
  std::array<NoiseModel, kFeatures> noise;
};

/// The pixels inside the rim.
struct Ring {
  cv::Size size;
  std::vector<int> index;  ///< of a pixel in the image, row by row
  std::vector<int> ring;   ///< its ring, counted outwards
  cv::Mat slot;            ///< CV_32S: back from the image, -1 outside
  int rings = 0;
};

bool inside(int u, int v, ImagePoint centre, const RimEllipse& rim) {
  // Pixels that the edge itself runs through belong to nobody.
  constexpr double kEdgePx = 0.5;
  const double c = std::cos(rim.angle_rad);
  const double s = std::sin(rim.angle_rad);
  const double du = u - centre.u_px;
  const double dv = v - centre.v_px;
  const double along = (c * du + s * dv) / (rim.a_px - kEdgePx);
  const double across = (c * dv - s * du) / (rim.b_px - kEdgePx);
  return along * along + across * across <= 1.0;
}

Ring ring_of(cv::Size size, ImagePoint centre, const RimEllipse& rim) {
  Ring ring;
  ring.size = size;
  ring.slot = cv::Mat(size, CV_32S, cv::Scalar(-1));
  const double width_px = std::max(2.5, rim.a_px / 40.0);
  for (int v = 0; v < size.height; ++v) {
    for (int u = 0; u < size.width; ++u) {
      if (!inside(u, v, centre, rim)) continue;
      ring.slot.at<int>(v, u) = static_cast<int>(ring.index.size());
      ring.index.push_back(v * size.width + u);
      ring.ring.push_back(
          static_cast<int>(std::hypot(u - centre.u_px, v - centre.v_px) / width_px));
      ring.rings = std::max(ring.rings, ring.ring.back() + 1);
    }
  }
  return ring;
}

View view_of(const cv::Mat& bgr, const Ring& ring) {
  View view;
  for (auto& feature : view.at) feature.reserve(ring.index.size());
  for (const int index : ring.index) {
    const cv::Vec3b& p = bgr.at<cv::Vec3b>(index / ring.size.width, index % ring.size.width);
    view.at[0].push_back(0.114F * static_cast<float>(p[0]) + 0.587F * static_cast<float>(p[1]) +
                         0.299F * static_cast<float>(p[2]));
    view.at[1].push_back(static_cast<float>(p[2]) - static_cast<float>(p[0]));
  }
  return view;
}

/// What stays of a frame's contrast when its light is taken away: logarithm minus local mean.
std::vector<float> detail_of(const cv::Mat& bgr, const Ring& ring) {
  cv::Mat grey;
  cv::cvtColor(bgr, grey, cv::COLOR_BGR2GRAY);
  grey.convertTo(grey, CV_32F);
  cv::GaussianBlur(grey, grey, {}, 1.0);
  grey += cv::Scalar(12.0);  // dark noise must not count as contrast
  cv::log(grey, grey);
  cv::Mat local;
  cv::blur(grey, local, {11, 11});
  grey -= local;
  std::vector<float> detail;
  detail.reserve(ring.index.size());
  for (const int index : ring.index) {
    detail.push_back(grey.at<float>(index / ring.size.width, index % ring.size.width));
  }
  return detail;
}

/// Share of pixels whose detail differs by more than noise does: more than 10 % of contrast.
double changed_share(const std::vector<float>& a, const std::vector<float>& b) {
  constexpr float kContrast = 0.12F;
  int changed = 0;
  for (std::size_t i = 0; i < a.size(); ++i) changed += std::abs(a[i] - b[i]) > kContrast ? 1 : 0;
  return changed / static_cast<double>(std::max<std::size_t>(1, a.size()));
}

float median_of(std::vector<float>& values) {
  const auto middle = values.begin() + static_cast<std::ptrdiff_t>(values.size() / 2);
  std::nth_element(values.begin(), middle, values.end());
  return *middle;
}

void find_middles(Group& group) {
  std::vector<float> values;
  for (std::size_t f = 0; f < kFeatures; ++f) {
    const std::size_t pixels = group.views.front().at[f].size();
    group.middle[f].resize(pixels);
    for (std::size_t i = 0; i < pixels; ++i) {
      values.clear();
      for (const View& view : group.views) values.push_back(view.at[f][i]);
      group.middle[f][i] = median_of(values);
    }
  }
}

/// Takes out each view's exposure: gain that makes its levels those of the median view over pixels
/// that count (`weight` over one half); all pixels before anything is known.
void level_out(Group& group, const std::vector<float>& weight) {
  std::vector<float> ratios;
  for (View& view : group.views) {
    ratios.clear();
    for (std::size_t i = 0; i < weight.size(); ++i) {
      const float level = view.at[0][i];
      if (weight[i] > 0.5F && group.middle[0][i] > 15.0F && level > 5.0F && level < 250.0F) {
        ratios.push_back(level / group.middle[0][i]);
      }
    }
    if (ratios.size() < 50) continue;
    const float gain = median_of(ratios);
    for (auto& feature : view.at) {
      for (float& x : feature) x /= gain;
    }
  }
  find_middles(group);
}

double variance_over_views(const Group& group, std::size_t feature, std::size_t pixel) {
  double sum = 0.0;
  double squares = 0.0;
  for (const View& view : group.views) {
    const double x = double{view.at[feature][pixel]};
    sum += x;
    squares += x * x;
  }
  const double n = static_cast<double>(group.views.size());
  return std::max(0.0, (squares - sum * sum / n) / (n - 1.0));
}

/// Noise of steady pixels by level: lower decile of the variances where nothing is known of the
/// pixels yet, the median over those that belong to the robot afterwards.
NoiseModel noise_by_level(const Group& group,
                          std::size_t feature,
                          const std::vector<float>& robot,
                          bool known) {
  constexpr std::size_t kBins = 16;
  constexpr std::size_t kLeastPixels = 40;
  std::array<std::vector<double>, kBins> variances;
  std::array<double, kBins> levels{};
  for (std::size_t i = 0; i < robot.size(); ++i) {
    const double level = double{group.middle[0][i]};
    if (level > 250.0 || (known && robot[i] < 0.9F)) continue;
    const auto bin = static_cast<std::size_t>(std::min(kBins - 1.0, level / 256.0 * kBins));
    variances[bin].push_back(variance_over_views(group, feature, i));
    levels[bin] += level;
  }
  // The quantile of chi squared over its mean (Wilson and Hilferty, 1931).
  const double degrees = static_cast<double>(group.views.size()) - 1.0;
  const double z = known ? 0.0 : -1.2816;
  const double share = known ? 0.5 : 0.1;
  const double c = 2.0 / (9.0 * degrees);
  const double quantile = std::max(0.02, std::pow(1.0 - c + z * std::sqrt(c), 3));
  std::vector<VarianceSample> samples;
  for (std::size_t bin = 0; bin < kBins; ++bin) {
    auto& in_bin = variances[bin];
    if (in_bin.size() < kLeastPixels) continue;
    const auto at =
        in_bin.begin() + static_cast<std::ptrdiff_t>(share * static_cast<double>(in_bin.size()));
    std::nth_element(in_bin.begin(), at, in_bin.end());
    samples.push_back({levels[bin] / static_cast<double>(in_bin.size()),
                       *at / quantile,
                       static_cast<double>(in_bin.size())});
  }
  if (samples.empty()) return {4.0, 0.0};
  if (samples.size() == 1) return {samples[0].variance, 0.0};
  return fit_noise(samples);
}

/// Distribution of a feature over each ring's floor, as logarithms of densities.
class RingLevels {
 public:
  RingLevels(const Ring& ring,
             const Group& group,
             std::size_t feature,
             const std::vector<float>& robot)
      : density_(static_cast<std::size_t>(ring.rings) * kBins, 0.0F),
        lowest_(feature == 0 ? 0.0F : -256.0F) {
    const auto rings = static_cast<std::size_t>(ring.rings);
    std::vector<double> count(rings * kBins, 0.0);
    std::vector<double> common(kBins, 1e-6);
    std::vector<double> pixels(rings, 0.0);
    for (std::size_t i = 0; i < robot.size(); ++i) {
      const auto r = static_cast<std::size_t>(ring.ring[i]);
      pixels[r] += 1.0;
      const double weight = 1.0 - double{robot[i]};
      if (weight < 0.02) continue;
      for (const View& view : group.views) {
        const std::size_t bin = bin_of(view.at[feature][i]);
        count[r * kBins + bin] += weight;
        common[bin] += weight;
      }
    }
    normalise(common.data());
    std::vector<double> own(kBins);
    for (std::size_t r = 0; r < rings; ++r) {
      // Neighbouring rings show nearly the same floor; a ring without floor borrows from all.
      for (std::size_t b = 0; b < kBins; ++b) {
        own[b] = 2.0 * count[r * kBins + b];
        if (r > 0) own[b] += count[(r - 1) * kBins + b];
        if (r + 1 < rings) own[b] += count[(r + 1) * kBins + b];
      }
      constexpr double kBorrowed = 0.15;
      const double borrowed =
          kBorrowed * 4.0 * pixels[r] * static_cast<double>(group.views.size()) + 1.0;
      for (std::size_t b = 0; b < kBins; ++b) own[b] += borrowed * common[b];
      smooth(own);
      normalise(own.data());
      for (std::size_t b = 0; b < kBins; ++b) {
        const double density = (0.98 * own[b] + 0.02 / kBins) / kBinWidth;
        density_[r * kBins + b] = static_cast<float>(std::log(density));
      }
    }
  }

  [[nodiscard]] double log_density(int ring, float value) const {
    return double{density_[static_cast<std::size_t>(ring) * kBins + bin_of(value)]};
  }

 private:
  static constexpr std::size_t kBins = 128;
  static constexpr double kBinWidth = 2.0;  ///< of the level; twice that for a difference

  [[nodiscard]] std::size_t bin_of(float value) const {
    const float place = (value - lowest_) / (lowest_ < 0.0F ? 4.0F : 2.0F);
    return static_cast<std::size_t>(std::clamp(place, 0.0F, kBins - 1.0F));
  }
  static void normalise(double* bins) {
    double sum = 0.0;
    for (std::size_t b = 0; b < kBins; ++b) sum += bins[b];
    for (std::size_t b = 0; b < kBins; ++b) bins[b] /= sum;
  }
  static void smooth(std::vector<double>& bins) {
    std::vector<double> out(bins.size());
    for (std::size_t b = 0; b < kBins; ++b) {
      const double low = bins[b > 0 ? b - 1 : b];
      const double high = bins[b + 1 < kBins ? b + 1 : b];
      out[b] = 0.25 * low + 0.5 * bins[b] + 0.25 * high;
    }
    bins.swap(out);
  }

  std::vector<float> density_;
  float lowest_;
};

/// Adds the logarithm of the Bayes factor 'steady' against 'one of the ring's levels' for a light.
void add_evidence(const Group& group,
                  const Ring& ring,
                  const std::vector<float>& robot,
                  std::vector<float>& evidence) {
  // A steady pixel shows something else in one view of a hundred thousand: a glint.
  constexpr double kGlint = 1e-5;
  constexpr std::array<double, kFeatures> kSpan = {256.0, 128.0};
  // The two features, and a pixel's colours after demosaicing, are not quite independent.
  constexpr double kTempered = 0.8;
  for (std::size_t f = 0; f < kFeatures; ++f) {
    const RingLevels levels(ring, group, f, robot);
    const double width = f == 0 ? 0.0 : std::log(2.0);  // of its bins, against the level's
    for (std::size_t i = 0; i < robot.size(); ++i) {
      const double variance = group.noise[f].variance(double{group.middle[0][i]});
      const double n = static_cast<double>(group.views.size());
      double sum = 0.0;
      double steady = 0.0;
      double floor = 0.0;
      // One step from the median to the mean of the views near it.
      double near = 0.0;
      const double middle = double{group.middle[f][i]};
      for (const View& view : group.views) {
        const double d = double{view.at[f][i]} - middle;
        if (d * d < 9.0 * variance) {
          sum += d;
          near += 1.0;
        }
      }
      const double mean = middle + (near > 0.0 ? sum / near : 0.0);
      for (const View& view : group.views) {
        const double d = double{view.at[f][i]} - mean;
        const double normal =
            std::exp(-0.5 * d * d / variance) / std::sqrt(2.0 * std::numbers::pi * variance);
        steady += std::log(normal + kGlint / kSpan[f]);
        floor += levels.log_density(ring.ring[i], view.at[f][i]) - width;
      }
      // Not knowing the level in advance costs its spread over what it could have been.
      steady += std::log(std::sqrt(2.0 * std::numbers::pi * variance / n) / kSpan[f]);
      evidence[i] += static_cast<float>(kTempered * (steady - floor));
    }
  }
}

/// Mean field of an Ising prior over the four neighbours: probability of 'robot' per pixel.
void smooth_field(const Ring& ring, const std::vector<float>& evidence, std::vector<float>& robot) {
  constexpr float kCoupling = 1.1F;
  constexpr float kMost = 14.0F;
  constexpr int kSweeps = 12;
  const int stride = ring.size.width;
  const int total = stride * ring.size.height;
  const int* slots = ring.slot.ptr<int>();
  for (int sweep = 0; sweep < kSweeps; ++sweep) {
    for (std::size_t i = 0; i < evidence.size(); ++i) {
      float field = std::clamp(evidence[i], -kMost, kMost);
      for (const int step : {-stride, -1, 1, stride}) {
        const int at = ring.index[i] + step;
        if (at < 0 || at >= total || slots[at] < 0) continue;
        field += kCoupling * (2.0F * robot[static_cast<std::size_t>(slots[at])] - 1.0F);
      }
      robot[i] = 1.0F / (1.0F + std::exp(-field));
    }
  }
}

/// Specks of either kind of fewer than `least` pixels become what surrounds them.
void drop_specks(cv::Mat& mask, const Ring& ring, int least) {
  for (const int value : {255, 0}) {
    cv::Mat kind = mask == value;
    for (int k = 0; k < static_cast<int>(kind.total()); ++k) {
      if (ring.slot.ptr<int>()[k] < 0) kind.ptr<std::uint8_t>()[k] = 0;
    }
    cv::Mat labels;
    cv::Mat stats;
    cv::Mat centroids;
    const int count = cv::connectedComponentsWithStats(kind, labels, stats, centroids, 4);
    for (int label = 1; label < count; ++label) {
      if (stats.at<int>(label, cv::CC_STAT_AREA) >= least) continue;
      const cv::Rect box(stats.at<int>(label, cv::CC_STAT_LEFT),
                         stats.at<int>(label, cv::CC_STAT_TOP),
                         stats.at<int>(label, cv::CC_STAT_WIDTH),
                         stats.at<int>(label, cv::CC_STAT_HEIGHT));
      mask(box).setTo(255 - value, labels(box) == label);
    }
  }
}

}  // namespace

MaskResult find_mask(std::span<const Frame> frames, ImagePoint centre, const RimEllipse& rim) {
  MaskResult result;
  result.refusal = MaskRefusal::too_few_frames;
  if (frames.size() < static_cast<std::size_t>(kLeastMaskFrames)) return result;
  const Ring ring = ring_of(frames.front().bgr.size(), centre, rim);

  // Views that differ, light by light.
  constexpr double kLeastChange = 0.02;
  std::map<std::string, Group> groups;
  std::map<std::string, std::vector<std::vector<float>>> details;
  for (const Frame& frame : frames) {
    std::vector<float> detail = detail_of(frame.bgr, ring);
    auto& known = details[frame.light];
    double least = 1.0;
    for (const auto& other : known) least = std::min(least, changed_share(detail, other));
    if (!known.empty()) result.moved = std::max(result.moved, least);
    if (!known.empty() && least < kLeastChange) continue;
    known.push_back(std::move(detail));
    groups[frame.light].views.push_back(view_of(frame.bgr, ring));
  }
  std::vector<Group> lights;
  for (auto& [name, group] : groups) {
    if (group.views.size() < 2) continue;
    result.frames_used += static_cast<int>(group.views.size());
    lights.push_back(std::move(group));
  }
  if (result.frames_used < kLeastMaskFrames) {
    result.refusal = MaskRefusal::motionless;
    return result;
  }

  std::vector<float> robot(ring.index.size(), 1.0F);
  for (Group& group : lights) {
    find_middles(group);
    level_out(group, robot);
    for (std::size_t f = 0; f < kFeatures; ++f) {
      group.noise[f] = noise_by_level(group, f, robot, false);
    }
  }
  // To begin with: what hardly moves in any light is the robot.
  for (std::size_t i = 0; i < robot.size(); ++i) {
    double worst = 0.0;
    for (const Group& group : lights) {
      worst = std::max(
          worst,
          variance_over_views(group, 0, i) / group.noise[0].variance(double{group.middle[0][i]}));
    }
    robot[i] = worst < 5.0 ? 0.95F : 0.05F;
  }
  std::vector<float> evidence(robot.size());
  for (int round = 0; round < 3; ++round) {
    if (round > 0) {
      for (Group& group : lights) {
        level_out(group, robot);
        for (std::size_t f = 0; f < kFeatures; ++f) {
          group.noise[f] = noise_by_level(group, f, robot, true);
        }
      }
    }
    std::fill(evidence.begin(), evidence.end(), 0.0F);
    for (const Group& group : lights) add_evidence(group, ring, robot, evidence);
    smooth_field(ring, evidence, robot);
  }

  result.mask = cv::Mat(ring.size, CV_8U, cv::Scalar(0));
  for (std::size_t i = 0; i < robot.size(); ++i) {
    if (robot[i] < 0.5F) result.mask.ptr<std::uint8_t>()[ring.index[i]] = 255;
  }
  drop_specks(result.mask, ring, 6);
  result.noise = lights.front().noise[0];
  result.visible_fraction =
      cv::countNonZero(result.mask) / static_cast<double>(std::max<std::size_t>(1, robot.size()));
  // Where less than a fifth of the ring ever changed, most of what stayed was floor.
  if (result.visible_fraction < 0.2) {
    result.refusal = MaskRefusal::motionless;
    result.mask.release();
    return result;
  }
  result.refusal = MaskRefusal::none;
  return result;
}

void keep_inside(ImagePoint centre, const RimEllipse& rim, cv::Mat& mask) {
  for (int v = 0; v < mask.rows; ++v) {
    for (int u = 0; u < mask.cols; ++u) {
      if (!inside(u, v, centre, rim)) mask.at<std::uint8_t>(v, u) = 0;
    }
  }
}

double visible_fraction(const cv::Mat& mask,
                        ImagePoint centre,
                        const std::optional<RimEllipse>& rim) {
  cv::Mat all(mask.size(), CV_8U, cv::Scalar(255));
  if (rim) keep_inside(centre, *rim, all);
  return cv::countNonZero(mask & all) / static_cast<double>(std::max(1, cv::countNonZero(all)));
}

void draw_strokes(std::span<const Stroke> strokes, cv::Mat& mask) {
  constexpr int kShift = 4;  // fixed point of the drawing routines
  constexpr double kOne = 1 << kShift;
  for (const Stroke& stroke : strokes) {
    const cv::Scalar value(stroke.hide ? 0 : 255);
    const auto fixed = [](ImagePoint p) {
      return cv::Point(cvRound(p.u_px * kOne), cvRound(p.v_px * kOne));
    };
    const int radius = std::max(1, cvRound(0.5 * stroke.width_px * kOne));
    const int width = std::max(1, cvRound(stroke.width_px));
    for (std::size_t k = 0; k < stroke.points.size(); ++k) {
      cv::circle(mask, fixed(stroke.points[k]), radius, value, cv::FILLED, cv::LINE_8, kShift);
      if (k == 0) continue;
      cv::line(mask,
               fixed(stroke.points[k - 1]),
               fixed(stroke.points[k]),
               value,
               width,
               cv::LINE_8,
               kShift);
    }
  }
}

}  // namespace rondel::vision
