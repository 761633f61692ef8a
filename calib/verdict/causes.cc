#include "calib/verdict/causes.h"

#include <fmt/core.h>

#include <Eigen/Cholesky>
#include <Eigen/Core>
#include <algorithm>
#include <cmath>
#include <limits>
#include <map>
#include <set>

#include "calib/verdict/statistics.h"

namespace rondel::verdict {
namespace {

/// A cause is named when chance alone would do as well less often than this.
constexpr double kSignificance = 0.02;
/// Criteria closer than this cannot be told apart: odds of exp(kApart / 2).
constexpr double kApart = 3.5;
/// A knock that moves places by less than this (RMS) is not worth naming.
constexpr double kLeastShiftPx = 0.12;
/// More odd rows than this are no slips of the pen.
constexpr int kFewRows = 4;
constexpr std::size_t kMostOddRows = 30;
/// Another mirror has to be better than a simpler knock by less chance than this.
constexpr double kMirrorChance = 0.002;

struct Problem {
  const KnockModel* model = nullptr;
  std::vector<Sighting> rows;
  std::vector<int> first;        ///< of each row, in the residual vector
  std::vector<double> radial_u;  ///< of range-only rows: unit vector along the radius
  std::vector<double> radial_v;
  int values = 0;
  std::vector<ImagePoint> base;
  Eigen::MatrixXd covariance;
  Eigen::MatrixXd whitener_lower;  ///< Cholesky factor of the covariance
  Eigen::MatrixXd precision;
};

constexpr std::array<double, 2> kNoKnock = {0.0, 0.0};

int size_of(const Problem& p, std::size_t row) { return p.rows[row].bearing_known ? 2 : 1; }

/// The row's part of a pixel difference: both coordinates, or along the radius only.
void put(const Problem& p, std::size_t row, double du, double dv, Eigen::VectorXd& out) {
  const int i = p.first[row];
  if (p.rows[row].bearing_known) {
    out[i] = du;
    out[i + 1] = dv;
  } else {
    out[i] = du * p.radial_u[row] + dv * p.radial_v[row];
  }
}

/// Rows that the calibrated robot can see, thinned evenly.
Problem make_problem(const KnockModel& model,
                     std::span<const Sighting> sightings,
                     const SightingNoise& noise) {
  Problem p{&model, {}, {}, {}, {}, 0, {}, {}, {}, {}};
  std::vector<std::size_t> usable;
  std::vector<ImagePoint> at;
  for (std::size_t i = 0; i < sightings.size(); ++i) {
    const auto pixel =
        model.pixel_of(sightings[i].tape, sightings[i].height_m, KnockKind::centre, kNoKnock);
    if (!pixel) continue;
    usable.push_back(i);
    at.push_back(*pixel);
  }
  const std::size_t keep = std::min<std::size_t>(usable.size(), kMostSightings);
  for (std::size_t k = 0; k < keep; ++k) {
    const std::size_t from = k * usable.size() / keep;
    const Sighting& s = sightings[usable[from]];
    // The radius' direction in the image, from a place a little farther out.
    const auto out = model.pixel_of(
        {s.tape.range_m * 1.01, s.tape.bearing_rad}, s.height_m, KnockKind::centre, kNoKnock);
    double u = 1.0;
    double v = 0.0;
    if (out) {
      const double length = std::hypot(out->u_px - at[from].u_px, out->v_px - at[from].v_px);
      if (length > 0.0) {
        u = (out->u_px - at[from].u_px) / length;
        v = (out->v_px - at[from].v_px) / length;
      }
    }
    p.rows.push_back(s);
    p.base.push_back(at[from]);
    p.radial_u.push_back(u);
    p.radial_v.push_back(v);
    p.first.push_back(p.values);
    p.values += s.bearing_known ? 2 : 1;
  }

  p.covariance = Eigen::MatrixXd::Zero(p.values, p.values);
  for (std::size_t i = 0; i < p.rows.size(); ++i) {
    const Sighting& s = p.rows[i];
    Eigen::VectorXd column = Eigen::VectorXd::Zero(p.values);
    const int size = s.bearing_known ? 2 : 1;
    for (int k = 0; k < size; ++k) {
      p.covariance(p.first[i] + k, p.first[i] + k) += noise.pixel_sd * noise.pixel_sd;
    }
    // Tape noise along and across the line from the robot.
    for (const FloorSpot off :
         {FloorSpot{s.tape.range_m + noise.tape_sd_m, s.tape.bearing_rad},
          FloorSpot{s.tape.range_m, s.tape.bearing_rad + noise.tape_sd_m / s.tape.range_m}}) {
      const auto moved = model.pixel_of(off, s.height_m, KnockKind::centre, kNoKnock);
      if (!moved) continue;
      put(p, i, moved->u_px - p.base[i].u_px, moved->v_px - p.base[i].v_px, column);
      p.covariance.block(p.first[i], p.first[i], size, size) +=
          column.segment(p.first[i], size) * column.segment(p.first[i], size).transpose();
    }
  }
  for (int m = 0; m < model.modes(); ++m) {
    Eigen::VectorXd column = Eigen::VectorXd::Zero(p.values);
    for (std::size_t i = 0; i < p.rows.size(); ++i) {
      const auto moved = model.pixel_in_mode(p.rows[i].tape, p.rows[i].height_m, m);
      if (moved) put(p, i, moved->u_px - p.base[i].u_px, moved->v_px - p.base[i].v_px, column);
    }
    p.covariance += column * column.transpose();
  }
  const Eigen::LLT<Eigen::MatrixXd> factor(p.covariance);
  p.whitener_lower = factor.matrixL();
  p.precision = factor.solve(Eigen::MatrixXd::Identity(p.values, p.values));
  return p;
}

Eigen::VectorXd whitened(const Problem& p, Eigen::VectorXd raw) {
  p.whitener_lower.triangularView<Eigen::Lower>().solveInPlace(raw);
  return raw;
}

/// Seen minus predicted, px. Nothing where a row would not be seen any more.
std::optional<Eigen::VectorXd> residuals(const Problem& p,
                                         KnockKind kind,
                                         std::span<const double> amounts) {
  Eigen::VectorXd raw(p.values);
  for (std::size_t i = 0; i < p.rows.size(); ++i) {
    const Sighting& s = p.rows[i];
    const auto at = p.model->pixel_of(s.tape, s.height_m, kind, amounts);
    if (!at) return std::nullopt;
    put(p, i, s.seen.u_px - at->u_px, s.seen.v_px - at->v_px, raw);
  }
  return raw;
}

struct KnockFit {
  std::vector<double> amounts;
  std::vector<double> amounts_sd;
  Eigen::VectorXd raw;
  double q = 0.0;  ///< squared whitened residuals
};

/// Damped Gauss-Newton (Levenberg 1944, Marquardt 1963) in units of the typical knock.
std::optional<KnockFit> fit_from(const Problem& p,
                                 const KnockInfo& info,
                                 std::vector<double> start) {
  const auto k = static_cast<Eigen::Index>(info.amounts);
  const auto cost = [&](const std::vector<double>& amounts) -> std::optional<Eigen::VectorXd> {
    const auto raw = residuals(p, info.kind, amounts);
    if (!raw) return std::nullopt;
    return whitened(p, *raw);
  };
  std::vector<double> at = std::move(start);
  auto r = cost(at);
  if (!r) return std::nullopt;
  double q = r->squaredNorm();
  double damping = 1e-3;
  Eigen::MatrixXd normal = Eigen::MatrixXd::Zero(k, k);
  for (int round = 0; round < 60; ++round) {
    Eigen::MatrixXd jacobian(p.values, k);
    for (Eigen::Index j = 0; j < k; ++j) {
      const double step = 0.02 * info.typical[static_cast<std::size_t>(j)];
      std::vector<double> above = at;
      std::vector<double> below = at;
      above[static_cast<std::size_t>(j)] += step;
      below[static_cast<std::size_t>(j)] -= step;
      const auto ra = cost(above);
      const auto rb = cost(below);
      if (ra && rb) {
        jacobian.col(j) = (*ra - *rb) / 0.04;
      } else if (ra) {
        jacobian.col(j) = (*ra - *r) / 0.02;
      } else if (rb) {
        jacobian.col(j) = (*r - *rb) / 0.02;
      } else {
        return std::nullopt;
      }
    }
    normal = jacobian.transpose() * jacobian;
    const Eigen::VectorXd gradient = jacobian.transpose() * *r;
    bool better = false;
    double moved = 0.0;
    for (int attempt = 0; attempt < 12 && !better; ++attempt) {
      Eigen::MatrixXd damped = normal;
      for (Eigen::Index j = 0; j < k; ++j) damped(j, j) += damping * normal(j, j) + 1e-12;
      const Eigen::VectorXd step = -damped.ldlt().solve(gradient);
      std::vector<double> next = at;
      for (Eigen::Index j = 0; j < k; ++j) {
        next[static_cast<std::size_t>(j)] += step[j] * info.typical[static_cast<std::size_t>(j)];
      }
      const auto rn = cost(next);
      if (rn && rn->squaredNorm() < q) {
        moved = step.norm();
        at = std::move(next);
        r = rn;
        q = rn->squaredNorm();
        damping = std::max(1e-9, 0.2 * damping);
        better = true;
      } else {
        damping *= 6.0;
      }
    }
    if (!better || moved < 1e-7) break;
  }
  KnockFit fit;
  fit.amounts = at;
  fit.q = q;
  fit.raw = *residuals(p, info.kind, at);
  const Eigen::MatrixXd spread = (normal + 1e-12 * Eigen::MatrixXd::Identity(k, k))
                                     .ldlt()
                                     .solve(Eigen::MatrixXd::Identity(k, k));
  for (Eigen::Index j = 0; j < k; ++j) {
    fit.amounts_sd.push_back(std::sqrt(std::max(0.0, spread(j, j))) *
                             info.typical[static_cast<std::size_t>(j)]);
  }
  return fit;
}

std::optional<KnockFit> fit_best(const Problem& p, const KnockInfo& info) {
  std::vector<std::vector<double>> starts = {
      std::vector<double>(static_cast<std::size_t>(info.amounts), 0.0)};
  if (info.kind == KnockKind::heading) {
    // All around: the least of a coarse search, beside no turn.
    double least = std::numeric_limits<double>::infinity();
    double best = 0.0;
    for (int i = 1; i < 24; ++i) {
      const double turn = wrap_angle(i * std::numbers::pi / 12.0);
      const auto raw = residuals(p, info.kind, std::vector<double>{turn});
      if (!raw) continue;
      const double q = whitened(p, *raw).squaredNorm();
      if (q < least) {
        least = q;
        best = turn;
      }
    }
    starts.push_back({best});
  }
  std::optional<KnockFit> best;
  for (std::vector<double>& start : starts) {
    auto fit = fit_from(p, info, std::move(start));
    if (fit && (!best || fit->q < best->q)) best = std::move(fit);
  }
  return best;
}

/// -2 ln L up to a constant, the noise scale integrated out.
double minus_two_log_likelihood(double q, int values, const SightingNoise& noise) {
  return (noise.prior_values + values) * std::log1p(q / noise.prior_values);
}

/// P of taking away `gain` of the squared residuals with k parameters by chance.
double chance(double gain, double left, int k, int values, const SightingNoise& noise) {
  const double freedom = noise.prior_values + values - k;
  const double f = (gain / k) / ((noise.prior_values + left) / freedom);
  return fisher_tail(f, k, freedom);
}

std::string degrees(double rad) { return fmt::format("{:.1f} deg", rad * kDegPerRad); }

std::string knock_text(KnockKind kind, std::span<const double> a) {
  const std::string cause(info_of(kind).cause);
  switch (kind) {
    case KnockKind::centre:
      return fmt::format("{} by ({:+.1f}, {:+.1f}) px", cause, a[0], a[1]);
    case KnockKind::tilt:
      return fmt::format("{} by {}", cause, degrees(std::hypot(a[0], a[1])));
    case KnockKind::eye_height:
      return fmt::format("{} by {:+.1f} mm", cause, 1e3 * a[0]);
    case KnockKind::focal:
      return fmt::format("{}: picture scaled by {:.3f}", cause, 1.0 + a[0]);
    case KnockKind::mirror:
      return cause;
    case KnockKind::heading:
      return fmt::format("{} by {:+.1f} deg", cause, a[0] * kDegPerRad);
    case KnockKind::count:
      break;
  }
  return cause;
}

double rms_of(const Eigen::VectorXd& raw) {
  return std::sqrt(raw.squaredNorm() / static_cast<double>(raw.size()));
}

/// How much each row stands out: the fall of the squared residuals when it is left out, given the
/// others (the rows are correlated through the calibration).
double fall_without(const Eigen::MatrixXd& precision,
                    const Eigen::VectorXd& weighted,  ///< precision * raw
                    int first,
                    int size) {
  const Eigen::MatrixXd block = precision.block(first, first, size, size);
  const Eigen::VectorXd part = weighted.segment(first, size);
  return part.dot(block.ldlt().solve(part));
}

/// Residuals from which rows can be taken out, the others staying correlated through the
/// calibration.
class Trimmed {
 public:
  Trimmed(const Problem& p, const Eigen::VectorXd& raw)
      : p_(p), precision_(p.precision), r_(raw), out_(p.rows.size(), false) {
    q_ = r_.dot(precision_ * r_);
  }
  [[nodiscard]] double q() const { return q_; }
  [[nodiscard]] int values_out() const { return values_out_; }
  [[nodiscard]] bool is_out(std::size_t row) const { return out_[row]; }
  [[nodiscard]] Eigen::VectorXd weighted() const { return precision_ * r_; }
  [[nodiscard]] double fall(std::size_t row, const Eigen::VectorXd& weighted) const {
    return fall_without(precision_, weighted, p_.first[row], size_of(p_, row));
  }
  void take_out(std::size_t row) {
    q_ -= fall(row, weighted());
    const int size = size_of(p_, row);
    const int at = p_.first[row];
    out_[row] = true;
    values_out_ += size;
    // Condition on the row's being free: Schur complement in the precision.
    const Eigen::MatrixXd columns = precision_.middleCols(at, size);
    const Eigen::MatrixXd block = precision_.block(at, at, size, size);
    precision_ -= columns * block.ldlt().solve(columns.transpose());
    // Its own block is now zero but for rounding; keep it from being met again.
    precision_.middleCols(at, size).setZero();
    precision_.middleRows(at, size).setZero();
    r_.segment(at, size).setZero();
  }

 private:
  const Problem& p_;
  Eigen::MatrixXd precision_;
  Eigen::VectorXd r_;
  std::vector<bool> out_;
  double q_ = 0.0;
  int values_out_ = 0;
};

struct OddRows {
  std::vector<std::size_t> rows;  ///< in the problem
  std::vector<double> p;
  double q = 0.0;  ///< without them
  int values = 0;  ///< taken out
};

/// Takes out rows one by one while each stands out by chance less often than `p_most` among the
/// rest.
OddRows find_odd_rows(const Problem& p,
                      const Eigen::VectorXd& raw,
                      int parameters,
                      const SightingNoise& noise,
                      double p_most,
                      std::size_t most) {
  OddRows odd;
  Trimmed rest(p, raw);
  while (odd.rows.size() < most) {
    const Eigen::VectorXd weighted = rest.weighted();
    double best_p = 1.0;
    double best_fall = -1.0;
    std::size_t best = 0;
    const int left_values = p.values - rest.values_out() - parameters;
    for (std::size_t i = 0; i < p.rows.size(); ++i) {
      const int size = size_of(p, i);
      if (rest.is_out(i) || left_values - size < 1) continue;
      const double fall = rest.fall(i, weighted);
      const double here = chance(fall, rest.q() - fall, size, left_values, noise);
      if (here < best_p || (here == best_p && fall > best_fall)) {
        best_p = here;
        best_fall = fall;
        best = i;
      }
    }
    best_p = std::min(1.0, best_p * static_cast<double>(p.rows.size() - odd.rows.size()));
    if (!(best_p < p_most)) break;
    rest.take_out(best);
    odd.rows.push_back(best);
    odd.p.push_back(best_p);
  }
  odd.q = rest.q();
  odd.values = rest.values_out();
  return odd;
}

/// The tape entry that would fit where the row was seen, by Newton on the knocked map from the
/// tape's own entry.
std::optional<FloorSpot> likely_spot(const Problem& p,
                                     const Sighting& s,
                                     KnockKind kind,
                                     std::span<const double> amounts) {
  // Ranges are searched in ratio, bearings all around: the entry may be off by anything.
  std::optional<FloorSpot> best;
  double least = std::numeric_limits<double>::infinity();
  const auto off = [&](FloorSpot spot) {
    const auto at = p.model->pixel_of(spot, s.height_m, kind, amounts);
    if (!at) return std::numeric_limits<double>::infinity();
    return std::hypot(at->u_px - s.seen.u_px, at->v_px - s.seen.v_px);
  };
  for (double range_m = 0.05; range_m < 12.0; range_m *= 1.15) {
    for (int b = 0; b < 36; ++b) {
      const FloorSpot spot{range_m, wrap_angle(b * std::numbers::pi / 18.0)};
      const double here = off(spot);
      if (here < least) {
        least = here;
        best = spot;
      }
    }
  }
  if (!best) return best;
  double range_step = 0.1;
  double bearing_step = 0.1;
  while (range_step > 1e-5) {
    bool better = false;
    for (const FloorSpot next :
         {FloorSpot{best->range_m * (1.0 + range_step), best->bearing_rad},
          FloorSpot{best->range_m / (1.0 + range_step), best->bearing_rad},
          FloorSpot{best->range_m, wrap_angle(best->bearing_rad + bearing_step)},
          FloorSpot{best->range_m, wrap_angle(best->bearing_rad - bearing_step)}}) {
      const double here = off(next);
      if (here < least) {
        least = here;
        best = next;
        better = true;
      }
    }
    if (!better) {
      range_step *= 0.5;
      bearing_step *= 0.5;
    }
  }
  // Somewhere else altogether: nothing to propose.
  return least < 1.0 ? best : std::nullopt;
}

std::vector<WrongRow> wrong_rows(const Problem& p,
                                 const OddRows& odd,
                                 KnockKind kind,
                                 std::span<const double> amounts) {
  std::vector<WrongRow> out;
  for (std::size_t n = 0; n < odd.rows.size(); ++n) {
    const Sighting& s = p.rows[odd.rows[n]];
    out.push_back({s.line, s.tape, s.bearing_known, likely_spot(p, s, kind, amounts), odd.p[n]});
  }
  std::sort(
      out.begin(), out.end(), [](const WrongRow& a, const WrongRow& b) { return a.line < b.line; });
  return out;
}

std::string rows_text(const std::vector<WrongRow>& rows) {
  std::string lines;
  for (const WrongRow& row : rows) {
    if (!lines.empty()) lines += ", ";
    lines += std::to_string(row.line);
  }
  if (rows.size() == 1) return "Tape row wrong: line " + lines;
  if (static_cast<int>(rows.size()) <= kFewRows) return "Tape rows wrong: lines " + lines;
  return fmt::format("{} rows stand out: lines {}", rows.size(), lines);
}

/// RMS over the rows of how far the knock moves them, px.
double shift_px(const Problem& p, KnockKind kind, std::span<const double> amounts) {
  double sum = 0.0;
  for (std::size_t i = 0; i < p.rows.size(); ++i) {
    const auto at = p.model->pixel_of(p.rows[i].tape, p.rows[i].height_m, kind, amounts);
    if (!at) continue;
    sum += std::pow(at->u_px - p.base[i].u_px, 2) + std::pow(at->v_px - p.base[i].v_px, 2);
  }
  return std::sqrt(sum / static_cast<double>(2 * p.rows.size()));
}

std::optional<TellApart> where_they_differ(const Problem& p,
                                           const Hypothesis& a,
                                           const Hypothesis& b,
                                           const SightingNoise& noise,
                                           double far_m,
                                           const std::function<bool(FloorSpot)>& visible) {
  const auto seen = [&](const Hypothesis& h, FloorSpot spot) {
    return h.kind ? p.model->pixel_of(spot, 0.0, *h.kind, h.amounts)
                  : p.model->pixel_of(spot, 0.0, KnockKind::centre, kNoKnock);
  };
  std::optional<TellApart> best;
  for (int r = 1; r <= 16; ++r) {
    for (int s = 0; s < 24; ++s) {
      const FloorSpot spot{far_m * r / 16.0, wrap_angle(s * std::numbers::pi / 12.0)};
      if (!visible(spot)) continue;
      const auto pa = seen(a, spot);
      const auto pb = seen(b, spot);
      if (!pa || !pb) continue;
      const double apart = std::hypot(pa->u_px - pb->u_px, pa->v_px - pb->v_px);
      // The tape's share of the noise, along the radius.
      const auto off = seen(a, {spot.range_m + noise.tape_sd_m, spot.bearing_rad});
      const double tape = off ? std::hypot(off->u_px - pa->u_px, off->v_px - pa->v_px) : 0.0;
      const double sigma = apart / std::hypot(noise.pixel_sd, tape);
      if (!best || sigma > best->apart_sigma) best = TellApart{spot, apart, sigma};
    }
  }
  return best;
}

}  // namespace

std::optional<std::vector<double>> fit_knock(const KnockModel& model,
                                             KnockKind kind,
                                             std::span<const Sighting> sightings,
                                             const SightingNoise& noise) {
  const Problem p = make_problem(model, sightings, noise);
  if (p.values <= info_of(kind).amounts) return std::nullopt;
  auto fit = fit_best(p, info_of(kind));
  if (!fit) return std::nullopt;
  return fit->amounts;
}

namespace {

/// A knock, or none, with the rows that stand out beside it.
struct Explained {
  std::vector<double> amounts;
  std::vector<double> amounts_sd;
  Eigen::VectorXd raw;
  OddRows odd;
  int parameters = 0;  ///< of the knock alone
  std::optional<double> criterion;
};

/// -2 ln L corrected, an odd row counting as free: its values are parameters, and which rows they
/// are is one choice among all.
std::optional<double> criterion_of(
    const Problem& p, double q, int parameters, const OddRows& odd, const SightingNoise& noise) {
  const auto n = static_cast<double>(p.rows.size());
  const auto k = static_cast<double>(odd.rows.size());
  const double choices = std::lgamma(n + 1.0) - std::lgamma(k + 1.0) - std::lgamma(n - k + 1.0);
  return corrected_criterion(minus_two_log_likelihood(q, p.values, noise) + 2.0 * choices,
                             parameters + odd.values,
                             p.values);
}

Problem without(const Problem& p, const OddRows& odd, const SightingNoise& noise) {
  std::vector<Sighting> rest;
  for (std::size_t i = 0; i < p.rows.size(); ++i) {
    if (std::find(odd.rows.begin(), odd.rows.end(), i) == odd.rows.end()) rest.push_back(p.rows[i]);
  }
  return make_problem(*p.model, rest, noise);
}

/// The knock fitted, twice where rows stand out from the first fit.
std::optional<Explained> explain(const Problem& p,
                                 const KnockInfo& info,
                                 const SightingNoise& noise,
                                 double p_odd,
                                 std::size_t most_odd) {
  auto fit = fit_best(p, info);
  if (!fit) return std::nullopt;
  Explained out;
  out.parameters = info.amounts;
  out.odd = find_odd_rows(p, fit->raw, info.amounts, noise, p_odd, most_odd);
  for (int round = 0; round < 2 && !out.odd.rows.empty(); ++round) {
    const auto again = fit_best(without(p, out.odd, noise), info);
    if (!again) break;
    const auto raw = residuals(p, info.kind, again->amounts);
    if (!raw) break;
    fit->amounts = again->amounts;
    fit->amounts_sd = again->amounts_sd;
    fit->raw = *raw;
    const OddRows before = out.odd;
    out.odd = find_odd_rows(p, fit->raw, info.amounts, noise, p_odd, most_odd);
    if (out.odd.rows == before.rows) break;
  }
  out.amounts = fit->amounts;
  out.amounts_sd = fit->amounts_sd;
  out.raw = fit->raw;
  out.criterion = criterion_of(p, out.odd.q, info.amounts, out.odd, noise);
  return out;
}

/// 'Nothing wrong' with exactly these rows left out.
double q_without(const Problem& p, const Eigen::VectorXd& raw, const OddRows& odd) {
  Trimmed rest(p, raw);
  for (const std::size_t row : odd.rows) rest.take_out(row);
  return rest.q();
}

double rms_without(const Problem& p, Eigen::VectorXd raw, const OddRows& odd) {
  for (const std::size_t row : odd.rows) raw.segment(p.first[row], size_of(p, row)).setZero();
  return std::sqrt(raw.squaredNorm() / std::max(1, p.values - odd.values));
}

std::size_t most_odd_rows(const Problem& p) {
  return std::max<std::size_t>(1, std::min(kMostOddRows, p.rows.size() / 5));
}

/// The pixel and tape noise that the residuals show once the knock that explains most, and rows
/// that stand out, are taken away; `noise` counts like its prior values. What the calibration is
/// uncertain by does not grow with them.
SightingNoise noise_seen(const Problem& p, const SightingNoise& noise, double p_odd) {
  const Eigen::VectorXd base = *residuals(p, KnockKind::centre, kNoKnock);
  const OddRows none = find_odd_rows(p, base, 0, noise, p_odd, most_odd_rows(p));
  double q = none.q;
  int left = p.values - none.values;
  for (const KnockInfo& info : kKnocks) {
    const auto e = explain(p, info, noise, p_odd, most_odd_rows(p));
    if (!e) continue;
    const int here = p.values - e->odd.values - e->parameters;
    if (here > 0 && e->odd.q / here < q / std::max(1, left)) {
      q = e->odd.q;
      left = here;
    }
  }
  const double scale = std::sqrt((noise.prior_values + q) / (noise.prior_values + left));
  SightingNoise seen = noise;
  seen.pixel_sd *= scale;
  seen.tape_sd_m *= scale;
  return seen;
}

}  // namespace

Diagnosis diagnose(const KnockModel& model,
                   std::span<const Sighting> sightings,
                   const SightingNoise& expected,
                   double far_m,
                   const std::function<bool(FloorSpot)>& visible) {
  Diagnosis diagnosis;
  const double hypotheses = static_cast<double>(kKnocks.size()) + 1.0;
  const double p_odd = kSignificance / hypotheses;
  SightingNoise noise = expected;
  Problem p = make_problem(model, sightings, noise);
  diagnosis.sightings = static_cast<int>(p.rows.size());
  if (diagnosis.sightings < kLeastSightings) {
    diagnosis.silence = fmt::format("{} found rows are too few to look for a cause; {} are needed",
                                    diagnosis.sightings,
                                    kLeastSightings);
    return diagnosis;
  }
  for (int round = 0; round < 2; ++round) {
    const double before = noise.pixel_sd;
    const SightingNoise seen = noise_seen(p, noise, p_odd);
    // Small changes are within the scale's own uncertainty, which the likelihood carries.
    if (std::abs(std::log(seen.pixel_sd / before)) < 0.2) break;
    noise = seen;
    p = make_problem(model, sightings, noise);
  }
  const Eigen::VectorXd base = *residuals(p, KnockKind::centre, kNoKnock);
  const double q0 = whitened(p, base).squaredNorm();
  diagnosis.rms_px = rms_of(base);
  diagnosis.noise_px = noise.pixel_sd;

  std::vector<Hypothesis> all;
  {
    Hypothesis none;
    none.id = "none";
    none.cause = "Nothing wrong";
    none.rms_px = diagnosis.rms_px;
    none.criterion = minus_two_log_likelihood(q0, p.values, noise);
    all.push_back(none);
  }
  const double none_criterion = all.front().criterion;
  double simpler_left = std::numeric_limits<double>::infinity();
  double simpler_criterion = 0.0;
  for (const KnockInfo& info : kKnocks) {
    const auto e = explain(p, info, noise, p_odd, most_odd_rows(p));
    if (!e || !e->criterion) continue;
    Hypothesis h;
    h.id = info.id;
    h.kind = info.kind;
    h.cause = knock_text(info.kind, e->amounts);
    h.amounts = e->amounts;
    h.amounts_sd = e->amounts_sd;
    h.parameters = info.amounts;
    h.criterion = *e->criterion;
    h.rms_px = rms_without(p, e->raw, e->odd);
    h.rows = wrong_rows(p, e->odd, info.kind, e->amounts);
    // Held against 'nothing wrong' on the same rows.
    const double q_none = q_without(p, base, e->odd);
    const int values = p.values - e->odd.values;
    h.explained = q_none > 0.0 ? std::max(0.0, 1.0 - e->odd.q / q_none) : 0.0;
    h.p =
        shift_px(p, info.kind, e->amounts) < kLeastShiftPx
            ? 1.0
            : std::min(
                  1.0,
                  hypotheses *
                      chance(
                          std::max(0.0, q_none - e->odd.q), e->odd.q, h.parameters, values, noise));
    if (info.kind == KnockKind::focal || info.kind == KnockKind::eye_height) {
      if (h.criterion < simpler_criterion || !std::isfinite(simpler_left)) {
        simpler_left = e->odd.q;
        simpler_criterion = h.criterion;
      }
    }
    if (info.kind == KnockKind::mirror && std::isfinite(simpler_left)) {
      // Another mirror can imitate every change along the radius, so it is named only where none
      // of the simpler ones will do.
      const double gain = std::max(0.0, simpler_left - e->odd.q);
      if (chance(gain, e->odd.q, 1, values - 1, noise) > kMirrorChance) {
        h.p = 1.0;
        h.criterion = std::max(h.criterion, simpler_criterion + 1e-6);
      }
    }
    all.push_back(std::move(h));
  }
  if (const OddRows odd = find_odd_rows(p, base, 0, noise, p_odd, most_odd_rows(p));
      !odd.rows.empty()) {
    Hypothesis h;
    h.id = "tape";
    h.rows = wrong_rows(p, odd, KnockKind::centre, kNoKnock);
    h.cause = rows_text(h.rows);
    h.parameters = odd.values;
    if (const auto criterion = criterion_of(p, odd.q, 0, odd, noise)) {
      h.criterion = *criterion;
      h.explained = q0 > 0.0 ? 1.0 - odd.q / q0 : 0.0;
      h.p = std::min(1.0, hypotheses * *std::min_element(odd.p.begin(), odd.p.end()));
      h.rms_px = rms_without(p, base, odd);
      all.push_back(std::move(h));
    }
  }
  for (Hypothesis& h : all) h.evidence = none_criterion - h.criterion;

  const auto named = [](const Hypothesis& h) { return h.id != "none" && h.p < kSignificance; };
  // Named ones first, by criterion; then the others.
  std::stable_sort(all.begin(), all.end(), [&](const Hypothesis& a, const Hypothesis& b) {
    if (named(a) != named(b)) return named(a);
    return a.criterion < b.criterion;
  });
  if (named(all.front())) {
    diagnosis.causes = 1;
    for (std::size_t i = 1; i < all.size(); ++i) {
      if (named(all[i]) && all[i].criterion - all.front().criterion < kApart) ++diagnosis.causes;
    }
    if (diagnosis.causes > 1) {
      diagnosis.tell_apart = where_they_differ(p, all[0], all[1], noise, far_m, visible);
    }
    if (all.front().kind) diagnosis.odd_rows = all.front().rows;
  } else {
    // 'Nothing wrong' leads when nothing is named.
    std::stable_partition(
        all.begin(), all.end(), [](const Hypothesis& h) { return h.id == "none"; });
  }
  diagnosis.hypotheses = std::move(all);
  return diagnosis;
}

std::vector<DriftedLight> drifted_lights(const VenueSpec& venue,
                                         std::span<const ImageEntry> images,
                                         std::span<const TapeEntry> tape,
                                         std::span<const RowResult> rows) {
  struct Count {
    int rows = 0;
    int found = 0;
  };
  std::map<std::pair<std::string, int>, Count> counts;  // (light, object; -1 all)
  std::set<std::string> lights;
  for (std::size_t i = 0; i < rows.size(); ++i) {
    const RowState state = rows[i].state;
    // Something of its colour was reported, if not in the right place: no matter of colours.
    if (state != RowState::found && state != RowState::missed) continue;
    const std::string& light = images[static_cast<std::size_t>(tape[i].image)].light;
    lights.insert(light);
    for (const int object : {-1, tape[i].object}) {
      Count& count = counts[{light, object}];
      ++count.rows;
      count.found += state == RowState::found ? 1 : 0;
    }
  }
  const auto log_choose = [](int n, int k) {
    return std::lgamma(n + 1.0) - std::lgamma(k + 1.0) - std::lgamma(n - k + 1.0);
  };
  std::vector<DriftedLight> out;
  for (const auto& [key, count] : counts) {
    const auto& [light, object] = key;
    if (static_cast<double>(count.found) >= venue.tolerance.recall * count.rows) continue;
    // Given that recall is what was asked for: P(so few or fewer found).
    double p = 0.0;
    const double asked = std::min(venue.tolerance.recall, 1.0 - 1e-9);
    for (int k = 0; k <= count.found; ++k) {
      p += std::exp(log_choose(count.rows, k) + k * std::log(asked) +
                    (count.rows - k) * std::log1p(-asked));
    }
    p = std::min(1.0, p * static_cast<double>(counts.size()));
    if (!(p < kSignificance)) continue;
    const double share = static_cast<double>(count.found) / count.rows;
    const auto log_likelihood = [&](double recall) {
      return (count.found > 0 ? count.found * std::log(recall) : 0.0) +
             (count.found < count.rows ? (count.rows - count.found) * std::log1p(-recall) : 0.0);
    };
    DriftedLight drift;
    drift.light = light;
    if (object >= 0) drift.object = venue.objects[static_cast<std::size_t>(object)].name;
    drift.rows = count.rows;
    drift.found = count.found;
    drift.p = p;
    drift.evidence = 2.0 * (log_likelihood(share) - log_likelihood(asked)) -
                     (count.rows > 2 ? 2.0 + 4.0 / (count.rows - 2.0) : 2.0);
    out.push_back(drift);
  }
  // One object alone says more than all of them together, unless it is all of them.
  std::vector<DriftedLight> told;
  for (const DriftedLight& drift : out) {
    int objects_drifted = 0;
    int objects_seen = 0;
    for (const auto& [key, count] : counts) {
      objects_seen += key.first == drift.light && key.second >= 0 ? 1 : 0;
    }
    for (const DriftedLight& other : out) {
      objects_drifted += other.light == drift.light && !other.object.empty() ? 1 : 0;
    }
    const bool whole_light = objects_drifted == objects_seen || objects_drifted == 0;
    if (drift.object.empty() == whole_light) told.push_back(drift);
  }
  std::stable_sort(told.begin(), told.end(), [](const DriftedLight& a, const DriftedLight& b) {
    return a.evidence > b.evidence;
  });
  return told;
}

}  // namespace rondel::verdict
