#include "vision/scene/survey.h"

#include <fmt/format.h>

#include <algorithm>
#include <cassert>
#include <cmath>
#include <map>
#include <opencv2/imgproc.hpp>
#include <set>

#include "vision/scene/noise.h"

namespace rondel::scene {
namespace {

/// A person's errors, drawn in order.
class Hand {
 public:
  explicit Hand(const Survey& plan) : plan_{plan} {}

  ImagePoint click(ImagePoint at) {
    const auto [du, dv] = normals(plan_.seed, next_++);
    return {at.u_px + plan_.mark_px * du, at.v_px + plan_.mark_px * dv};
  }
  FloorSpot measure(FloorSpot spot) {
    const FloorPoint p = to_point(spot);
    const auto [dx, dy] = normals(plan_.seed, next_++);
    return to_spot(FloorPoint{p.x_m + plan_.tape_m * dx, p.y_m + plan_.tape_m * dy});
  }
  double between(double low, double high) {
    return low + (high - low) * uniform(plan_.seed ^ 0xABCDULL, next_++);
  }

 private:
  const Survey& plan_;
  std::uint64_t next_ = 0;
};

/// Stands free: worth a row on a tape sheet. A box is measured at its foot, which must be in sight.
bool stands_free(const ObjectTruth& seen, const Survey& plan) {
  const double most_hidden = seen.height_m > 0.0 ? 0.2 : 0.02;
  return seen.area_px >= 8.0 && seen.hidden_fraction < most_hidden &&
         seen.spot.range_m < plan.farthest_m && seen.at.has_value();
}

std::string mark_row(const std::string& image,
                     ImagePoint at,
                     const std::string& object,
                     FloorSpot spot) {
  return fmt::format("{},{:.1f},{:.1f},{},{:.3f},{:.1f}\n",
                     image,
                     at.u_px,
                     at.v_px,
                     object,
                     spot.range_m,
                     spot.bearing_rad * kDegPerRad);
}

std::string floor_mark(const Scene& scene,
                       const std::vector<FrameTruth>& truths,
                       int index,
                       Hand& hand) {
  const Survey& plan = *scene.survey;
  // Evenly over the image: far marks closer together than by range.
  const double share = plan.floor_marks > 1 ? index / (plan.floor_marks - 1.0) : 0.5;
  for (int attempt = 0; attempt < 500; ++attempt) {
    const FrameTruth& truth = truths[static_cast<std::size_t>(
        hand.between(0.0, static_cast<double>(truths.size()) - 1e-9))];
    const double range = 1.0 / ((1.0 - share) / plan.nearest_m + share / plan.farthest_m) +
                         hand.between(-0.02, 0.02);
    const FloorSpot spot{range, wrap_angle(2.399963 * index + hand.between(-0.4, 0.4))};
    const auto at = pixel_of(scene.rig, spot);
    if (!at) continue;
    const int u = static_cast<int>(std::lround(at->u_px));
    const int v = static_cast<int>(std::lround(at->v_px));
    if (u < 4 || v < 4 || u >= truth.classes.cols - 4 || v >= truth.classes.rows - 4) continue;
    bool bare = true;
    for (int dv = -2; dv <= 2; ++dv) {
      for (int du = -2; du <= 2; ++du) {
        bare = bare && truth.classes.at<unsigned char>(v + dv, u + du) ==
                           static_cast<unsigned char>(PixelClass::floor);
      }
    }
    if (!bare) continue;
    return mark_row(truth.image, hand.click(*at), "", hand.measure(spot));
  }
  return "";
}

/// The roundest place of a region of a map: its deepest pixel and how far that is from the edge.
struct Deep {
  cv::Point at;
  double radius = 0.0;
};
Deep deepest(const cv::Mat& region) {
  cv::Mat framed;
  cv::copyMakeBorder(region, framed, 1, 1, 1, 1, cv::BORDER_CONSTANT, 0);
  cv::Mat depth;
  cv::distanceTransform(framed, depth, cv::DIST_L2, cv::DIST_MASK_PRECISE);
  Deep deep;
  cv::minMaxLoc(depth, nullptr, &deep.radius, nullptr, &deep.at);
  deep.at -= cv::Point(1, 1);
  return deep;
}

std::string disc_row(const std::string& image,
                     const std::string& label,
                     const Deep& deep,
                     double share) {
  return fmt::format("{},{},disc,{} {} {:.1f}\n",
                     image,
                     label,
                     deep.at.x,
                     deep.at.y,
                     std::max(1.0, share * deep.radius));
}

std::string box_row(const std::string& image,
                    const std::string& label,
                    const Deep& deep,
                    double share) {
  const int half = std::max(1, static_cast<int>(share * deep.radius / std::sqrt(2.0)));
  return fmt::format("{},{},box,{} {} {} {}\n",
                     image,
                     label,
                     deep.at.x - half,
                     deep.at.y - half,
                     deep.at.x + half,
                     deep.at.y + half);
}

/// Frames of a light that between them show every kind of object near and at a middling distance.
std::set<std::size_t> frames_to_label(const Scene& scene,
                                      const std::vector<FrameTruth>& truths,
                                      std::size_t light) {
  std::map<std::string, std::vector<std::pair<double, std::size_t>>> sights;
  for (std::size_t f = 0; f < truths.size(); ++f) {
    if (scene.frames[f].light != light) continue;
    for (const ObjectTruth& seen : truths[f].seen) {
      if (stands_free(seen, *scene.survey)) sights[seen.name].emplace_back(seen.area_px, f);
    }
  }
  std::set<std::size_t> chosen;
  for (auto& [name, of_name] : sights) {
    std::sort(of_name.rbegin(), of_name.rend());
    chosen.insert(of_name.front().second);
    chosen.insert(of_name[of_name.size() / 2].second);
  }
  return chosen;
}

/// Around every piece of an object that can be made out: a disc for a ball in full sight, else the
/// piece's outline.
std::string swatches_of_objects(const Scene& scene, const FrameTruth& truth) {
  constexpr int kLeastPx = 12;
  std::string rows;
  for (const ObjectTruth& seen : truth.seen) {
    const cv::Mat whole = truth.objects == static_cast<double>(seen.object + 1);
    if (scene.objects[seen.object].solid == Solid::ball && seen.hidden_fraction < 0.02) {
      if (cv::countNonZero(whole) >= kLeastPx) {
        rows += disc_row(truth.image, seen.name, deepest(whole), 1.0);
      }
      continue;
    }
    std::vector<std::vector<cv::Point>> outlines;
    cv::findContours(whole, outlines, cv::RETR_EXTERNAL, cv::CHAIN_APPROX_SIMPLE);
    for (const std::vector<cv::Point>& outline : outlines) {
      if (cv::contourArea(outline) < kLeastPx) continue;
      std::vector<cv::Point> corners;
      cv::approxPolyDP(outline, corners, 0.8, true);
      if (corners.size() < 3) continue;
      std::string points;
      for (const cv::Point& p : corners) points += fmt::format(" {} {}", p.x, p.y);
      rows += fmt::format("{},{},polygon,{}\n", truth.image, seen.name, points.substr(1));
    }
  }
  return rows;
}

std::string swatches_of_surroundings(const FrameTruth& truth) {
  std::string rows;
  // Clear of every object by some pixels: what a person would draw around.
  cv::Mat objects;
  cv::dilate(truth.objects, objects, cv::getStructuringElement(cv::MORPH_ELLIPSE, {9, 9}));
  const cv::Mat clear = truth.mask & (objects == 0);
  cv::Mat left = clear.clone();
  for (int k = 0; k < 5; ++k) {
    const Deep deep = deepest(left);
    if (deep.radius < 4.0) break;
    rows += box_row(truth.image, "surroundings", deep, 1.0);
    cv::circle(left, deep.at, static_cast<int>(deep.radius), 0, cv::FILLED);
  }
  for (const PixelClass other : {PixelClass::scenery, PixelClass::wall}) {
    const Deep deep = deepest(clear & (truth.classes == static_cast<double>(other)));
    if (deep.radius >= 2.0) rows += disc_row(truth.image, "surroundings", deep, 0.9);
  }
  return rows;
}

}  // namespace

Sheets survey(const Scene& scene, const std::vector<FrameTruth>& truths) {
  assert(scene.survey && truths.size() == scene.frames.size());
  const Survey& plan = *scene.survey;
  Hand hand{plan};
  Sheets sheets;

  sheets.marks_csv = "image,u_px,v_px,object,range_m,bearing_deg\n";
  for (int k = 0; k < plan.floor_marks; ++k) sheets.marks_csv += floor_mark(scene, truths, k, hand);
  struct Candidate {
    std::size_t frame = 0;
    const ObjectTruth* seen = nullptr;
  };
  std::vector<Candidate> balls;
  for (std::size_t f = 0; f < truths.size(); ++f) {
    for (const ObjectTruth& seen : truths[f].seen) {
      if (scene.objects[seen.object].solid == Solid::ball && stands_free(seen, plan) &&
          seen.hidden_fraction < 0.02 && seen.spot.range_m >= plan.nearest_m) {
        balls.push_back({f, &seen});
      }
    }
  }
  std::stable_sort(balls.begin(), balls.end(), [](const Candidate& a, const Candidate& b) {
    return a.seen->spot.range_m < b.seen->spot.range_m;
  });
  const auto count =
      std::min<std::size_t>(static_cast<std::size_t>(plan.object_marks), balls.size());
  for (std::size_t k = 0; k < count; ++k) {
    // The middles of equal shares of the candidates, near to far.
    const Candidate& pick = balls[(2 * k + 1) * balls.size() / (2 * count)];
    sheets.marks_csv += mark_row(truths[pick.frame].image,
                                 hand.click(*pick.seen->at),
                                 pick.seen->name,
                                 hand.measure(pick.seen->spot));
  }

  sheets.swatches_csv = "image,label,shape,points\n";
  for (std::size_t light = 0; light < scene.lights.size(); ++light) {
    for (const std::size_t f : frames_to_label(scene, truths, light)) {
      sheets.swatches_csv += swatches_of_objects(scene, truths[f]);
      sheets.swatches_csv += swatches_of_surroundings(truths[f]);
    }
  }

  sheets.tape_csv = "image,object,range_m,bearing_deg\n";
  std::set<std::string> names;
  for (const SceneObject& object : scene.objects) {
    if (!object.name.empty()) names.insert(object.name);
  }
  int absent = 0;
  for (const FrameTruth& truth : truths) {
    for (const std::string& name : names) {
      bool nowhere = true;
      for (const ObjectTruth& seen : truth.seen) {
        if (seen.name != name) continue;
        nowhere = nowhere && seen.area_px == 0.0;
        if (!stands_free(seen, plan)) continue;
        const FloorSpot spot = hand.measure(seen.spot);
        sheets.tape_csv += fmt::format("{},{},{:.3f},{:.1f}\n",
                                       truth.image,
                                       name,
                                       spot.range_m,
                                       spot.bearing_rad * kDegPerRad);
      }
      if (nowhere && absent < 6) {
        sheets.tape_csv += fmt::format("{},{},,\n", truth.image, name);
        ++absent;
      }
    }
  }
  return sheets;
}

}  // namespace rondel::scene
