#include "vision/rim/find_rim.h"

#include <Eigen/Dense>
#include <algorithm>
#include <array>
#include <cmath>
#include <numbers>
#include <opencv2/imgproc.hpp>

#include "vision/rim/ellipse.h"
#include "vision/rim/radial_edges.h"

namespace rondel::vision {
namespace {

constexpr double kTwoPi = 2.0 * std::numbers::pi;

/// Which edges count: a real rim mostly is darker, or mostly brighter, outwards.
enum class Kind { falling, rising, any };

bool counts(const RadialEdge& edge, Kind kind) {
  return kind == Kind::any || (edge.step < 0.0) == (kind == Kind::falling);
}

/// How well a circle is drawn in the edges.
struct Support {
  double share = 0.0;     ///< of the rays inside the image, those with an edge on the circle
  double in_image = 0.0;  ///< share of the circumference inside the image
  [[nodiscard]] double of_all() const { return share * in_image; }
};

/// Calls `visit(ray, nearest edge or null)` for each ray that meets the circle inside the image.
template <class Visit>
void walk(
    const RadialEdges& edges, const Ellipse& circle, double within_px, Kind kind, Visit visit) {
  const double du = circle.p[0] - edges.from.u_px;
  const double dv = circle.p[1] - edges.from.v_px;
  const double squared = circle.p[2] * circle.p[2];
  for (std::size_t ray = 0; ray < edges.rays.size(); ++ray) {
    const double along = du * edges.cos_azimuth[ray] + dv * edges.sin_azimuth[ray];
    const double across = dv * edges.cos_azimuth[ray] - du * edges.sin_azimuth[ray];
    const double r = along + std::sqrt(std::max(0.0, squared - across * across));
    if (r > edges.end_px[ray]) continue;
    const RadialEdge* best = nullptr;
    double distance = within_px;
    for (const RadialEdge& edge : edges.rays[ray]) {
      const double d = std::abs(edge.radius_px - r);
      if (d > distance || !counts(edge, kind)) continue;
      distance = d;
      best = &edge;
    }
    visit(ray, best);
  }
}

Support support_of(const RadialEdges& edges, const Ellipse& circle, double within_px, Kind kind) {
  int met = 0;
  int hit = 0;
  walk(edges, circle, within_px, kind, [&](std::size_t, const RadialEdge* edge) {
    ++met;
    if (edge == nullptr) return;
    ++hit;
  });
  Support support;
  support.in_image = met / static_cast<double>(edges.rays.size());
  support.share = met > 0 ? hit / static_cast<double>(met) : 0.0;
  return support;
}

bool holds(const Ellipse& circle, ImagePoint at) {
  return std::hypot(at.u_px - circle.p[0], at.v_px - circle.p[1]) < 0.9 * circle.p[2];
}

/// Kasa's least squares circle (1976) through the edges on `circle`.
std::optional<Ellipse> refitted(const RadialEdges& edges,
                                const Ellipse& circle,
                                double within_px,
                                Kind kind) {
  Eigen::Matrix3d normal = Eigen::Matrix3d::Zero();
  Eigen::Vector3d right = Eigen::Vector3d::Zero();
  walk(edges, circle, within_px, kind, [&](std::size_t ray, const RadialEdge* edge) {
    if (edge == nullptr) return;
    const double u = edge->radius_px * edges.cos_azimuth[ray];
    const double v = edge->radius_px * edges.sin_azimuth[ray];
    const Eigen::Vector3d row(u, v, 1.0);
    normal += row * row.transpose();
    right += row * (u * u + v * v);
  });
  if (normal(2, 2) < 6.0 || std::abs(normal.determinant()) < 1e-6) return std::nullopt;
  const Eigen::Vector3d x = normal.inverse() * right;
  const double squared = x[2] + 0.25 * (x[0] * x[0] + x[1] * x[1]);
  if (squared <= 0.0) return std::nullopt;
  return rondel::vision::circle({edges.from.u_px + 0.5 * x[0], edges.from.v_px + 0.5 * x[1]},
                                std::sqrt(squared));
}

struct Candidate {
  Ellipse circle;
  Kind kind = Kind::any;
  Support support;
};

struct RadiusRange {
  double low_px = 0.0;
  double high_px = 0.0;
};

/// An edge in the image.
struct EdgeAt {
  double u_px = 0.0;
  double v_px = 0.0;
};

std::vector<EdgeAt> places_of(const RadialEdges& edges) {
  std::vector<EdgeAt> places;
  for (std::size_t ray = 0; ray < edges.rays.size(); ++ray) {
    for (const RadialEdge& e : edges.rays[ray]) {
      places.push_back({edges.from.u_px + e.radius_px * edges.cos_azimuth[ray],
                        edges.from.v_px + e.radius_px * edges.sin_azimuth[ray]});
    }
  }
  return places;
}

/// Where to start looking: for centres on a grid the radii at which most edges lie, over how many
/// could be seen there (Hough, 1962). Complete: no circle is missed for want of luck.
std::vector<Ellipse> voted_circles(const RadialEdges& edges,
                                   cv::Size size,
                                   RadiusRange radius,
                                   double centre_reach_px,
                                   double grid_px) {
  constexpr std::size_t kDirections = 72;
  constexpr std::size_t kKept = 200;
  const std::vector<EdgeAt> places = places_of(edges);
  const auto bins = static_cast<std::size_t>(radius.high_px / grid_px) + 2;
  std::vector<double> votes(bins);
  std::vector<double> seen(bins);
  struct Vote {
    double share;
    Ellipse circle;
  };
  std::vector<Vote> found;
  const int n = static_cast<int>(centre_reach_px / grid_px);
  for (int a = -n; a <= n; ++a) {
    for (int b = -n; b <= n; ++b) {
      if (std::hypot(a, b) > n) continue;
      const ImagePoint centre{edges.from.u_px + a * grid_px, edges.from.v_px + b * grid_px};
      std::fill(votes.begin(), votes.end(), 0.0);
      std::fill(seen.begin(), seen.end(), 0.0);
      for (const EdgeAt& at : places) {
        const double r = std::hypot(at.u_px - centre.u_px, at.v_px - centre.v_px) / grid_px;
        const auto bin = static_cast<std::size_t>(r);
        if (bin + 1 >= bins) continue;
        const double part = r - static_cast<double>(bin);
        votes[bin] += 1.0 - part;
        votes[bin + 1] += part;
      }
      for (std::size_t k = 0; k < kDirections; ++k) {
        const double t = kTwoPi * static_cast<double>(k) / kDirections;
        const double cu = std::cos(t);
        const double cv = std::sin(t);
        const double way_u = cu > 0 ? (size.width - 2 - centre.u_px) / std::max(cu, 1e-9)
                                    : (1 - centre.u_px) / std::min(cu, -1e-9);
        const double way_v = cv > 0 ? (size.height - 2 - centre.v_px) / std::max(cv, 1e-9)
                                    : (1 - centre.v_px) / std::min(cv, -1e-9);
        const double way = std::clamp(std::min(way_u, way_v) / grid_px, 0.0, double(bins - 1));
        seen[static_cast<std::size_t>(way)] += 1.0 / kDirections;
      }
      for (std::size_t bin = bins - 1; bin-- > 0;) seen[bin] += seen[bin + 1];
      for (std::size_t bin = 1; bin + 1 < bins; ++bin) {
        const double r = static_cast<double>(bin) * grid_px;
        if (r < radius.low_px || r > radius.high_px || seen[bin] < 0.5) continue;
        const double sum = votes[bin - 1] + votes[bin] + votes[bin + 1];
        if (votes[bin] < votes[bin - 1] || votes[bin] < votes[bin + 1]) continue;
        const double share = sum / (seen[bin] * static_cast<double>(edges.rays.size()));
        if (share > 0.35) found.push_back({share, circle(centre, r)});
      }
    }
  }
  std::stable_sort(
      found.begin(), found.end(), [](const Vote& x, const Vote& y) { return x.share > y.share; });
  std::vector<Ellipse> starts;
  for (const Vote& vote : found) {
    const bool known = std::any_of(starts.begin(), starts.end(), [&](const Ellipse& other) {
      return (vote.circle.p.head<3>() - other.p.head<3>()).cwiseAbs().maxCoeff() < 2.5 * grid_px;
    });
    if (!known) starts.push_back(vote.circle);
    if (starts.size() == kKept) break;
  }
  return starts;
}

/// The circles that the edges draw, best supported first; an edge belongs to one circle only, so
/// that no circle lives on pieces of better ones.
std::vector<Candidate> circles_in(RadialEdges edges,
                                  cv::Size size,
                                  RadiusRange radius,
                                  double centre_reach_px,
                                  double within_px,
                                  double least_in_image) {
  std::vector<Ellipse> starts =
      voted_circles(edges, size, radius, centre_reach_px, 2.0 * within_px);
  std::vector<Candidate> found;
  constexpr double kLeastShare = 0.3;
  // Edges of both kinds are met by chance twice as often.
  constexpr double kMixedWorth = 0.75;
  constexpr std::size_t kMostCircles = 8;
  while (found.size() < kMostCircles && !starts.empty()) {
    Candidate best;
    for (const Ellipse& start : starts) {
      for (const Kind kind : {Kind::falling, Kind::rising, Kind::any}) {
        Ellipse now = start;
        for (const double slack : {3.0, 2.0, 1.5, 1.0}) {
          const auto better = refitted(edges, now, slack * within_px, kind);
          if (!better || !holds(*better, edges.from) || better->p[2] < radius.low_px ||
              better->p[2] > radius.high_px) {
            break;
          }
          now = *better;
        }
        if (std::hypot(now.p[0] - edges.from.u_px, now.p[1] - edges.from.v_px) > centre_reach_px) {
          continue;
        }
        Support support = support_of(edges, now, within_px, kind);
        if (kind == Kind::any) support.share *= kMixedWorth;
        if (support.in_image >= least_in_image && support.share > best.support.share) {
          best = {now, kind, support};
        }
      }
    }
    if (best.support.share < kLeastShare) break;
    found.push_back(best);
    walk(edges,
         best.circle,
         1.5 * within_px,
         best.kind,
         [&](std::size_t ray, const RadialEdge* edge) {
           if (edge == nullptr) return;
           const double r = edge->radius_px;
           std::erase_if(edges.rays[ray], [&](const RadialEdge& e) { return e.radius_px == r; });
         });
    std::erase_if(starts, [&](const Ellipse& start) {
      return support_of(edges, start, 2.0 * within_px, Kind::any).share < kLeastShare;
    });
  }
  return found;
}

double median(std::vector<double> values) {
  const auto middle = values.begin() + static_cast<std::ptrdiff_t>(values.size() / 2);
  std::nth_element(values.begin(), middle, values.end());
  return *middle;
}

/// Median level between two fractions of the circle's radius; none outside the image.
std::optional<double> level_between(const cv::Mat& grey,
                                    const Ellipse& circle,
                                    double from_px,
                                    double to_px) {
  std::vector<double> levels;
  for (int ray = 0; ray < 120; ++ray) {
    const double azimuth = kTwoPi * ray / 120;
    for (double r = from_px; r <= to_px; r += 1.0) {
      const ImagePoint at{circle.p[0] + r * std::cos(azimuth), circle.p[1] + r * std::sin(azimuth)};
      if (at.u_px < 1 || at.v_px < 1 || at.u_px > grey.cols - 3 || at.v_px > grey.rows - 3) {
        continue;
      }
      levels.push_back(level_at(grey, at));
    }
  }
  if (levels.size() < 30) return std::nullopt;
  return median(std::move(levels));
}

/// The largest of the circles that is drawn well enough to be a mirror's edge, 40 % of which may be
/// hidden and not all of the rest seen.
const Candidate* outermost(const std::vector<Candidate>& circles) {
  if (circles.empty()) return nullptr;
  const double enough = std::max(0.31, 0.5 * circles.front().support.of_all());
  const Candidate* outer = nullptr;
  for (const Candidate& c : circles) {
    if (c.support.of_all() < enough) continue;
    if (outer == nullptr || c.circle.p[2] > outer->circle.p[2]) outer = &c;
  }
  return outer;
}

/// How far the centres of a mirror's edge and of the ring that holds it may lie apart: both are
/// round about the mirror's axis, at nearly the same height.
double apart_px(double outer_px) { return 0.03 * outer_px; }

/// The mirror's edge among `circles` where `outer` is the far side of a dark ring that holds it:
/// the largest inside about the same centre that gets darker outwards, with little light between.
std::optional<Candidate> held_in(const cv::Mat& grey,
                                 const Candidate& outer,
                                 const std::vector<Candidate>& circles) {
  constexpr double kEnough = 0.31;
  const double r1 = outer.circle.p[2];
  std::optional<Candidate> mirror;
  for (const Candidate& c : circles) {
    const double r2 = c.circle.p[2];
    const double off =
        std::hypot(c.circle.p[0] - outer.circle.p[0], c.circle.p[1] - outer.circle.p[1]);
    if (r2 < 0.7 * r1 || r2 > 0.985 * r1 || off > apart_px(r1) || c.kind != Kind::falling ||
        c.support.of_all() < kEnough) {
      continue;
    }
    const double margin = std::min(2.0, 0.25 * (r1 - r2));
    const auto ring = level_between(grey, c.circle, r2 + margin, r1 - margin - off);
    const auto inside = level_between(grey, c.circle, 0.85 * r2, 0.97 * r2);
    if (!ring || !inside || *ring > 0.7 * *inside) continue;
    if (!mirror || r2 > mirror->circle.p[2]) mirror = c;
  }
  return mirror;
}

/// The same, looked for again from the ring's own centre where the first look missed it.
std::optional<Candidate> held_mirror(const cv::Mat& grey,
                                     const Candidate& outer,
                                     const std::vector<Candidate>& circles,
                                     double within_px) {
  if (outer.kind == Kind::falling) return std::nullopt;
  if (const auto mirror = held_in(grey, outer, circles)) return mirror;
  const double r1 = outer.circle.p[2];
  const RadialEdges edges = radial_edges(grey, outer.circle.centre(), 240, 10, 2.0);
  return held_in(
      grey,
      outer,
      circles_in(edges, grey.size(), {0.7 * r1, 0.985 * r1}, apart_px(r1), within_px, 0.5));
}

cv::Mat grey_of(const cv::Mat& bgr) {
  cv::Mat grey;
  if (bgr.channels() == 3) {
    cv::cvtColor(bgr, grey, cv::COLOR_BGR2GRAY);
  } else {
    grey = bgr;
  }
  grey.convertTo(grey, CV_32F);
  return grey;
}

struct Refined {
  EllipseFit fit;
  double seen = 0.0;
};

/// Moves the ellipse to where most rays have an edge on it, each ray counting the same however
/// strong its edge: what lies near the rim inside (a dark skirting, a lane) may be stronger than
/// the rim, but is no ellipse for long. Coarse to fine over centre and radius.
Ellipse lock_on(const NearEdges& edges, Ellipse start, double reach_px) {
  const auto agreement = [&](double du, double dv, double dr, double width_px) {
    double sum = 0.0;
    for (std::size_t ray = 0; ray < edges.rays.size(); ray += 4) {
      if (edges.rays[ray].empty()) continue;
      const double wanted =
          edges.start_px[ray] + dr + du * edges.cos_azimuth[ray] + dv * edges.sin_azimuth[ray];
      double nearest = 3.0 * width_px;
      for (const RadialEdge& e : edges.rays[ray]) {
        nearest = std::min(nearest, std::abs(e.radius_px - wanted));
      }
      const double x = nearest / width_px;
      sum += std::max(0.0, 1.0 - x * x / 9.0);
    }
    return sum;
  };
  double du = 0.0;
  double dv = 0.0;
  double dr = 0.0;
  double span = 0.6 * reach_px;
  for (double step = 0.3 * reach_px; step > 0.04 * reach_px; step *= 0.5) {
    double best = -1.0;
    const double u0 = du;
    const double v0 = dv;
    const double r0 = dr;
    const int n = cvRound(span / step);
    for (int a = -n; a <= n; ++a) {
      for (int b = -n; b <= n; ++b) {
        for (int c = n; c >= -n; --c) {  // of equals the outer one
          const double score =
              agreement(u0 + a * step, v0 + b * step, r0 + c * step, std::max(0.25, 0.5 * step));
          if (score <= best) continue;
          best = score;
          du = u0 + a * step;
          dv = v0 + b * step;
          dr = r0 + c * step;
        }
      }
    }
    span = 2.0 * step;
  }
  start.p[0] += du;
  start.p[1] += dv;
  start.p[2] += dr;
  start.p[3] += dr;
  return start;
}

/// Sub-pixel edges about `start`, window narrowing, and their ellipse.
std::optional<Refined> refine(const cv::Mat& grey,
                              Ellipse start,
                              double reach_px,
                              double least_step) {
  constexpr int kRays = 720;
  constexpr double kSpreadRays = 2.0;
  start =
      lock_on(edges_near(grey, start, reach_px, least_step, kRays, kSpreadRays), start, reach_px);
  std::optional<EllipseFit> fit;
  int on_curve = 0;
  for (const double within_px : {1.5, 1.0, 0.8}) {
    const NearEdges edges = edges_near(grey, start, 3.0, least_step, kRays, kSpreadRays);
    std::vector<ImagePoint> points;
    for (std::size_t ray = 0; ray < edges.rays.size(); ++ray) {
      const RadialEdge* best = nullptr;
      double distance = within_px;
      for (const RadialEdge& e : edges.rays[ray]) {
        const double d = std::abs(e.radius_px - edges.start_px[ray]);
        if (d < distance) {
          distance = d;
          best = &e;
        }
      }
      if (best == nullptr) continue;
      points.push_back({edges.from.u_px + best->radius_px * edges.cos_azimuth[ray],
                        edges.from.v_px + best->radius_px * edges.sin_azimuth[ray]});
    }
    if (points.size() < kRays / 4) return std::nullopt;
    fit = fit_ellipse(points, start, {0.003}, 24);
    if (!fit) return std::nullopt;
    start = fit->ellipse;
    on_curve = 0;
    for (const double w : fit->weight) on_curve += w > 0.3 ? 1 : 0;
  }
  return Refined{*fit, on_curve / double{kRays}};
}

/// What neighbouring points do not show: a scene that keeps to the rim's inside over a wide arc (a
/// skirting, a wall's foot) pulls the whole arc, and few such arcs make up the scatter. So half the
/// points' variance counts as if it never averaged, on top of what blur and light alone do. Both
/// measured on rendered frames (tests/bench/rim_bench).
constexpr double kSharedErrorPx = 0.03;
constexpr double kArcShare = 0.5;

ObservedPoint observed(const EllipseFit& fit) {
  const double extra = kSharedErrorPx * kSharedErrorPx + kArcShare * fit.noise_px * fit.noise_px;
  return {fit.ellipse.centre(),
          {fit.cov_px2(0, 0) + extra, fit.cov_px2(0, 1), fit.cov_px2(1, 1) + extra}};
}

/// The camera's own reflection: the best drawn small circle near the rim's centre that gets
/// brighter outwards.
void find_reflection(const cv::Mat& grey, Rim& rim) {
  const double r = rim.ellipse.a_px;
  const RadialEdges edges = radial_edges(grey, rim.centre.at, 120, 6, 1.0);
  const double within = std::max(0.8, 0.006 * r);
  std::vector<Candidate> circles =
      circles_in(edges, grey.size(), {std::max(3.0, 0.03 * r), 0.3 * r}, 0.1 * r, within, 1.0);
  const Candidate* best = nullptr;
  for (const Candidate& c : circles) {
    const double off =
        std::hypot(c.circle.p[0] - rim.centre.at.u_px, c.circle.p[1] - rim.centre.at.v_px);
    if (off > 0.1 * r || c.support.share < 0.7 || c.kind != Kind::rising) continue;
    if (best == nullptr || c.support.share > best->support.share) best = &c;
  }
  if (best == nullptr) return;
  const auto fine = refine(grey, best->circle, 2.0, 3.0 * edges.noise);
  if (!fine || fine->seen < 0.5) return;
  rim.reflection = observed(fine->fit);
  rim.reflection_radius_px = fine->fit.ellipse.mean_radius_px();
}

}  // namespace

std::optional<Rim> find_rim(const cv::Mat& bgr, const RimSearch& search) {
  cv::Mat grey = grey_of(bgr);
  if (grey.cols < 64 || grey.rows < 64) return std::nullopt;
  // The search works on about 320 x 240; the ellipse is then fitted at full size.
  cv::Mat small = grey;
  double scale = 1.0;
  const int longest = std::max(grey.cols, grey.rows);
  if (longest > 480) {
    scale = longest / 400.0;
    cv::resize(grey, small, {}, 1.0 / scale, 1.0 / scale, cv::INTER_AREA);
  }
  const double scale_u = grey.cols / static_cast<double>(small.cols);
  const double scale_v = grey.rows / static_cast<double>(small.rows);
  cv::GaussianBlur(small, small, {}, 1.0);
  const ImagePoint middle{0.5 * (small.cols - 1), 0.5 * (small.rows - 1)};
  const double shorter = std::min(small.cols, small.rows);
  RadiusRange radius{0.2 * shorter, 0.75 * shorter};
  if (search.radius_px) {
    const double slack = std::max(4.0 * search.radius_px->sd, 0.12 * search.radius_px->value);
    radius = {(search.radius_px->value - slack) / scale_u,
              (search.radius_px->value + slack) / scale_u};
  }
  constexpr double kWithinPx = 1.3;
  // Twice where it is faint: such arcs come out best when the rays start from their own centre.
  std::optional<Candidate> edge;
  double noise = 0.0;
  double reach = 0.2 * shorter;
  for (ImagePoint from = middle; const double spread_rays : {1.5, 3.0}) {
    const RadialEdges edges = radial_edges(small, from, 240, 10, spread_rays);
    const std::vector<Candidate> circles =
        circles_in(edges, small.size(), radius, reach, kWithinPx, 0.5);
    const Candidate* found = outermost(circles);
    if (found == nullptr) break;
    const auto held = held_mirror(small, *found, circles, kWithinPx);
    edge = held ? *held : *found;
    noise = edges.noise;
    if (found->support.of_all() > 0.6) break;
    from = found->circle.centre();
    reach = 8.0;
  }
  if (!edge) return std::nullopt;

  Ellipse start = edge->circle;
  start.p[0] = (start.p[0] + 0.5) * scale_u - 0.5;
  start.p[1] = (start.p[1] + 0.5) * scale_v - 0.5;
  start.p[2] *= scale_u;
  start.p[3] *= scale_v;
  cv::Mat smooth;
  cv::GaussianBlur(grey, smooth, {}, 0.7);
  const auto fine = refine(smooth, start, 3.0 * scale, 3.0 * noise / scale);
  // Less than this on the ellipse is a chance find, not a mirror with 40 % of its edge hidden.
  constexpr double kLeastSeen = 0.36;
  if (!fine || fine->seen < kLeastSeen) return std::nullopt;
  Rim rim;
  rim.centre = observed(fine->fit);
  rim.ellipse = fine->fit.ellipse.axes();
  rim.radius_sd_px = 0.5 * std::sqrt(fine->fit.cov_px2(2, 2) + fine->fit.cov_px2(3, 3) +
                                     2.0 * fine->fit.cov_px2(2, 3));
  rim.edge_noise_px = fine->fit.noise_px;
  rim.seen = fine->seen;
  find_reflection(smooth, rim);
  return rim;
}

}  // namespace rondel::vision
