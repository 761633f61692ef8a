#pragma once

#include <Eigen/Dense>
#include <array>
#include <cmath>
#include <memory>
#include <optional>
#include <random>
#include <string>
#include <vector>

#include "calib/optics/trace.h"
#include "calib/verdict/causes.h"
#include "vision/scene/truth_trace.h"

// Robots with known truth that are calibrated, knocked in one known way, and checked: the truth is
// the scenes' own trace (another implementation than the one the diagnosis uses).
namespace rondel::verdict::trials {

/// Uniform and normal numbers that are the same on every machine.
class Dice {
 public:
  explicit Dice(std::uint32_t seed) : engine_(seed) {}
  double uniform(double low, double high) {
    const double unit = (static_cast<double>(engine_()) + 0.5) / 4294967296.0;
    return low + (high - low) * unit;
  }
  double normal(double sd = 1.0) {
    const double radius = std::sqrt(-2.0 * std::log(uniform(0.0, 1.0)));
    return sd * radius * std::cos(uniform(0.0, 2.0 * std::numbers::pi));
  }
  int whole(int below) { return static_cast<int>(uniform(0.0, below)); }

 private:
  std::mt19937 engine_;
};

inline constexpr double kPixelSd = 0.3;
inline constexpr double kTapeSdM = 0.003;
inline constexpr double kBallHeightM = 0.037;

struct Drawn {
  FloorSpot tape;
  ImagePoint seen;
};

/// A place between 0.3 and 2.2 m, all around, as it is taped and seen.
inline Drawn look(const scene::SceneRig& rig, Dice& dice, double pixel_sd = kPixelSd) {
  for (;;) {
    // Even in pixel radius rather than in range: as marks usually lie.
    const double range_m = 0.3 * std::pow(2.2 / 0.3, dice.uniform(0.0, 1.0));
    const FloorSpot truth{range_m, dice.uniform(-std::numbers::pi, std::numbers::pi)};
    const auto at = scene::pixel_of(rig, truth, kBallHeightM);
    if (!at) continue;
    const FloorPoint p = to_point(truth);
    return {to_spot({p.x_m + dice.normal(kTapeSdM), p.y_m + dice.normal(kTapeSdM)}),
            {at->u_px + dice.normal(pixel_sd), at->v_px + dice.normal(pixel_sd)}};
  }
}

inline std::vector<Sighting> look_at(const scene::SceneRig& rig, int rows, Dice& dice) {
  std::vector<Sighting> out;
  for (int i = 0; i < rows; ++i) {
    const Drawn d = look(rig, dice);
    out.push_back({i + 2, d.tape, true, kBallHeightM, d.seen});
  }
  return out;
}

/// The drawing: the sample rig of the documentation.
inline scene::SceneRig drawing() { return {}; }
inline constexpr int kParameters = 12;
/// One standard deviation of what a rig differs from its drawing.
inline constexpr std::array<double, kParameters> kSpread = {
    5.0, 2.0, 2.0, 0.001, 0.0008, 0.08, 0.009, 0.009, 0.0005, 0.0005, 0.003, 0.05};

inline optics::RigGeometry<double> geometry(const std::array<double, kParameters>& off) {
  const scene::SceneRig d = drawing();
  optics::RigGeometry<double> g;
  g.focal_px = d.focal_px + off[0];
  g.cu_px = 0.5 * (d.width_px - 1) + off[1];
  g.cv_px = 0.5 * (d.height_px - 1) + off[2];
  g.distance_m = d.distance_m + off[3];
  g.mirror.vertex_radius_m = d.vertex_radius_m + off[4];
  g.mirror.conic_constant = d.conic_constant + off[5];
  g.tilt_x = off[6];
  g.tilt_y = off[7];
  g.shift_x_m = off[8];
  g.shift_y_m = off[9];
  g.eye_height_m = d.eye_height_m + off[10];
  g.heading_rad = off[11];
  return g;
}

/// A rig within its tolerances.
inline scene::SceneRig built(Dice& dice) {
  scene::SceneRig rig = drawing();
  rig.rim_radius_m = 0.034;
  rig.focal_px += dice.normal(kSpread[0]);
  rig.principal_du_px = dice.normal(kSpread[1]);
  rig.principal_dv_px = dice.normal(kSpread[2]);
  rig.distance_m += dice.normal(kSpread[3]);
  rig.vertex_radius_m += dice.normal(kSpread[4]);
  rig.conic_constant += dice.normal(kSpread[5]);
  rig.tilt_x_rad = dice.normal(kSpread[6]);
  rig.tilt_y_rad = dice.normal(kSpread[7]);
  rig.shift_x_m = dice.normal(kSpread[8]);
  rig.shift_y_m = dice.normal(kSpread[9]);
  rig.eye_height_m += dice.normal(kSpread[10]);
  rig.heading_rad = dice.normal(kSpread[11]);
  return rig;
}

struct Calibrated {
  optics::RigGeometry<double> rig;
  std::vector<optics::RigGeometry<double>> modes;
};

/// Calibration from marks with the drawing as prior: the usual MAP estimate with its covariance.
inline Calibrated calibrate(const scene::SceneRig& truth, int marks, Dice& dice) {
  std::vector<Drawn> seen;
  for (int i = 0; i < marks; ++i) seen.push_back(look(truth, dice));
  using Vector = Eigen::Matrix<double, kParameters, 1>;
  using Square = Eigen::Matrix<double, kParameters, kParameters>;
  const auto rig_at = [](const Vector& x) {
    std::array<double, kParameters> off{};
    for (std::size_t j = 0; j < kParameters; ++j)
      off[j] = x[static_cast<Eigen::Index>(j)] * kSpread[j];
    return geometry(off);
  };
  const auto pixel = [&](const optics::RigGeometry<double>& g, FloorSpot s) {
    const FloorPoint p = to_point(s);
    return optics::floor_to_pixel(g, p.x_m, p.y_m, kBallHeightM);
  };
  Vector x = Vector::Zero();
  Square information = Square::Identity();
  for (int round = 0; round < 12; ++round) {
    information = Square::Identity();
    Vector gradient = x;
    const auto g = rig_at(x);
    for (const Drawn& d : seen) {
      const auto at = pixel(g, d.tape);
      if (!at) continue;
      Eigen::Matrix<double, 2, kParameters> jacobian;
      for (int j = 0; j < kParameters; ++j) {
        Vector above = x;
        Vector below = x;
        above[j] += 0.01;
        below[j] -= 0.01;
        const auto a = pixel(rig_at(above), d.tape);
        const auto b = pixel(rig_at(below), d.tape);
        if (a && b) jacobian.col(j) << (a->u_px - b->u_px) / 0.02, (a->v_px - b->v_px) / 0.02;
      }
      Eigen::Matrix2d noise = Eigen::Matrix2d::Identity() * kPixelSd * kPixelSd;
      for (const FloorSpot off :
           {FloorSpot{d.tape.range_m + kTapeSdM, d.tape.bearing_rad},
            FloorSpot{d.tape.range_m, d.tape.bearing_rad + kTapeSdM / d.tape.range_m}}) {
        const auto moved = pixel(g, off);
        if (!moved) continue;
        const Eigen::Vector2d c(moved->u_px - at->u_px, moved->v_px - at->v_px);
        noise += c * c.transpose();
      }
      const Eigen::Matrix2d weight = noise.inverse();
      const Eigen::Vector2d r(at->u_px - d.seen.u_px, at->v_px - d.seen.v_px);
      information += jacobian.transpose() * weight * jacobian;
      gradient += jacobian.transpose() * weight * r;
    }
    const Vector step = information.ldlt().solve(gradient);
    x -= step;
    if (step.norm() < 1e-6) break;
  }
  Calibrated out;
  out.rig = rig_at(x);
  const Square covariance = information.inverse();
  const Eigen::SelfAdjointEigenSolver<Square> eigen(covariance);
  for (int m = 0; m < kParameters; ++m) {
    const Vector mode =
        eigen.eigenvectors().col(m) * std::sqrt(std::max(0.0, eigen.eigenvalues()[m]));
    out.modes.push_back(rig_at(x + mode));
  }
  return out;
}

enum class Kind { none, tilt, centre, eye_height, focal, heading };
inline constexpr std::array<const char*, 6> kKindIds = {
    "none", "tilt", "centre", "eye_height", "focal", "heading"};
/// 1 degree, 3 px, 10 mm, 3 %, 5 degrees.
inline constexpr std::array<double, 6> kSizes = {
    0.0, kRadPerDeg, 3.0, 0.010, 0.03, 5.0 * kRadPerDeg};

/// The truth knocked by the table's size into direction `angle_rad` (its cosine's sign where there
/// is no direction).
inline scene::SceneRig knock(scene::SceneRig rig, Kind kind, double angle_rad) {
  const double size = kSizes[static_cast<std::size_t>(kind)];
  const double sign = std::cos(angle_rad) >= 0.0 ? 1.0 : -1.0;
  switch (kind) {
    case Kind::none:
      break;
    case Kind::tilt:
      rig.tilt_x_rad += size * std::cos(angle_rad);
      rig.tilt_y_rad += size * std::sin(angle_rad);
      break;
    case Kind::centre:
      rig.principal_du_px += size * std::cos(angle_rad);
      rig.principal_dv_px += size * std::sin(angle_rad);
      break;
    case Kind::eye_height:
      rig.eye_height_m += sign * size;
      break;
    case Kind::focal:
      rig.focal_px *= 1.0 + sign * size;
      break;
    case Kind::heading:
      rig.heading_rad += sign * size;
      break;
  }
  return rig;
}

/// Which knock a likelihood ratio would name that is given the calibration, the noise and the true
/// size of every knock, and looks for the direction only.
inline Kind oracle(const Calibrated& calibrated, const std::vector<Sighting>& rows) {
  const auto n = static_cast<Eigen::Index>(2 * rows.size());
  const auto seen = [](const optics::RigGeometry<double>& g, const Sighting& s) {
    const FloorPoint p = to_point(s.tape);
    return optics::floor_to_pixel(g, p.x_m, p.y_m, s.height_m);
  };
  Eigen::MatrixXd covariance = Eigen::MatrixXd::Identity(n, n) * kPixelSd * kPixelSd;
  Eigen::VectorXd base(n);
  for (Eigen::Index i = 0; i < n / 2; ++i) {
    const Sighting& s = rows[static_cast<std::size_t>(i)];
    const auto at = seen(calibrated.rig, s);
    if (!at) return Kind::none;
    base.segment<2>(2 * i) << at->u_px, at->v_px;
    for (const FloorSpot off :
         {FloorSpot{s.tape.range_m + kTapeSdM, s.tape.bearing_rad},
          FloorSpot{s.tape.range_m, s.tape.bearing_rad + kTapeSdM / s.tape.range_m}}) {
      Sighting moved_row = s;
      moved_row.tape = off;
      const auto moved = seen(calibrated.rig, moved_row);
      if (!moved) continue;
      const Eigen::Vector2d c(moved->u_px - at->u_px, moved->v_px - at->v_px);
      covariance.block<2, 2>(2 * i, 2 * i) += c * c.transpose();
    }
  }
  for (const auto& mode : calibrated.modes) {
    Eigen::VectorXd column = Eigen::VectorXd::Zero(n);
    for (Eigen::Index i = 0; i < n / 2; ++i) {
      const auto at = seen(mode, rows[static_cast<std::size_t>(i)]);
      if (at) column.segment<2>(2 * i) << at->u_px - base[2 * i], at->v_px - base[2 * i + 1];
    }
    covariance += column * column.transpose();
  }
  const Eigen::LLT<Eigen::MatrixXd> factor(covariance);
  Kind best = Kind::none;
  double least = 1e300;
  for (const Kind kind : {Kind::tilt, Kind::centre, Kind::eye_height, Kind::focal, Kind::heading}) {
    const bool turned = kind == Kind::tilt || kind == Kind::centre;
    for (int d = 0; d < (turned ? 180 : 2); ++d) {
      const double angle = turned ? d * std::numbers::pi / 90.0 : d * std::numbers::pi;
      const double size = kSizes[static_cast<std::size_t>(kind)];
      const double sign = std::cos(angle) >= 0.0 ? 1.0 : -1.0;
      std::array<double, 2> amounts = {sign * size, 0.0};
      if (turned) amounts = {size * std::cos(angle), size * std::sin(angle)};
      KnockKind as = KnockKind::heading;
      if (kind == Kind::tilt) as = KnockKind::tilt;
      if (kind == Kind::centre) as = KnockKind::centre;
      if (kind == Kind::eye_height) as = KnockKind::eye_height;
      if (kind == Kind::focal) as = KnockKind::focal;
      const auto rig = knocked(calibrated.rig, as, amounts);
      Eigen::VectorXd r(n);
      bool all = true;
      for (Eigen::Index i = 0; i < n / 2 && all; ++i) {
        const Sighting& s = rows[static_cast<std::size_t>(i)];
        const auto at = seen(rig, s);
        all = at.has_value();
        if (all) r.segment<2>(2 * i) << s.seen.u_px - at->u_px, s.seen.v_px - at->v_px;
      }
      if (!all) continue;
      const double q = factor.matrixL().solve(r).squaredNorm();
      if (q < least) {
        least = q;
        best = kind;
      }
    }
  }
  return best;
}

inline SightingNoise sighting_noise() { return {kPixelSd, kTapeSdM, 20.0}; }

inline Diagnosis diagnose_rows(const Calibrated& calibrated, const std::vector<Sighting>& rows) {
  const auto model = knocks_of_rig(calibrated.rig, calibrated.modes);
  return diagnose(*model, rows, sighting_noise(), 2.2, [](FloorSpot) { return true; });
}

enum class Answer { right, undecided, silent, wrong };
/// Right: the one named cause is the knock. Undecided: it is among those named as not to be told
/// apart. Silent: nothing is named.
inline Answer judge_answer(const Diagnosis& diagnosis, Kind kind) {
  const std::string id = kKindIds[static_cast<std::size_t>(kind)];
  if (diagnosis.causes == 0) return kind == Kind::none ? Answer::right : Answer::silent;
  if (diagnosis.causes == 1) {
    return diagnosis.hypotheses.front().id == id ? Answer::right : Answer::wrong;
  }
  for (int i = 0; i < diagnosis.causes; ++i) {
    if (diagnosis.hypotheses[static_cast<std::size_t>(i)].id == id) return Answer::undecided;
  }
  return Answer::wrong;
}

struct Tally {
  int right = 0;
  int undecided = 0;
  int silent = 0;
  int wrong = 0;
  void add(Answer answer) {
    right += answer == Answer::right ? 1 : 0;
    undecided += answer == Answer::undecided ? 1 : 0;
    silent += answer == Answer::silent ? 1 : 0;
    wrong += answer == Answer::wrong ? 1 : 0;
  }
};

struct Trial {
  scene::SceneRig knocked;
  Calibrated calibrated;
  std::vector<Sighting> rows;
};
/// A rig is built, calibrated, knocked, and checked.
inline Trial one_trial(Kind kind, int rows, int marks, Dice& dice) {
  const scene::SceneRig before = built(dice);
  Trial trial;
  trial.calibrated = calibrate(before, marks, dice);
  trial.knocked = knock(before, kind, dice.uniform(-std::numbers::pi, std::numbers::pi));
  trial.rows = look_at(trial.knocked, rows, dice);
  return trial;
}

struct WrongRowTrial {
  Calibrated calibrated;
  std::vector<Sighting> rows;
  int wrong = 0;  ///< line
  FloorSpot right;
};
/// One row among `rows` says something people write by mistake: 10 or 20 cm misread, 15 degrees
/// misread, left for right, another row's place. `least_px`: drawn again until the mistake moves
/// the place by as much in the picture; a test that has to pick one row among 20 and one
/// explanation among 7 at 0.02 sees with 97 % power what is off by z(1 - 0.01 / 140) + z(0.97)
/// = 5.7 standard deviations of a row, with the tape's share and the calibration's about 0.4 px
/// each.
inline constexpr double kVisibleMistakePx = 2.3;
inline WrongRowTrial one_wrong_row(int rows, int marks, double least_px, Dice& dice) {
  const scene::SceneRig rig = built(dice);
  WrongRowTrial trial;
  trial.calibrated = calibrate(rig, marks, dice);
  trial.rows = look_at(rig, rows, dice);
  for (;;) {
    const auto at = static_cast<std::size_t>(dice.whole(rows));
    FloorSpot tape = trial.rows[at].tape;
    switch (dice.whole(5)) {
      case 0:
        tape.range_m += tape.range_m > 0.4 && dice.whole(2) == 0 ? -0.1 : 0.1;
        break;
      case 1:
        tape.range_m += 0.2;
        break;
      case 2:
        tape.bearing_rad = wrap_angle(tape.bearing_rad + 15.0 * kRadPerDeg);
        break;
      case 3:
        tape.bearing_rad = -tape.bearing_rad;
        break;
      default:
        tape = trial.rows[(at + 1) % trial.rows.size()].tape;
        break;
    }
    const auto right = scene::pixel_of(rig, trial.rows[at].tape, kBallHeightM);
    const auto wrong = scene::pixel_of(rig, tape, kBallHeightM);
    if (!right || !wrong) continue;
    if (std::hypot(wrong->u_px - right->u_px, wrong->v_px - right->v_px) < least_px) continue;
    trial.right = trial.rows[at].tape;
    trial.rows[at].tape = tape;
    trial.wrong = trial.rows[at].line;
    return trial;
  }
}

struct WrongRowAnswer {
  bool named = false;      ///< the row is among those named wrong
  bool alone = false;      ///< and no other is
  bool corrected = false;  ///< and what it should read is within 6 % and 3 degrees of the truth
};
inline WrongRowAnswer judge_wrong_row(const WrongRowTrial& trial, const Diagnosis& diagnosis) {
  WrongRowAnswer answer;
  if (diagnosis.causes == 0) return answer;
  const Hypothesis& first = diagnosis.hypotheses.front();
  const std::vector<WrongRow>& rows = first.id == "tape" ? first.rows : diagnosis.odd_rows;
  for (const WrongRow& row : rows) {
    if (row.line != trial.wrong) continue;
    answer.named = first.id == "tape";
    answer.alone = answer.named && rows.size() == 1 && diagnosis.causes == 1;
    answer.corrected =
        answer.named && row.likely &&
        std::abs(row.likely->range_m / trial.right.range_m - 1.0) < 0.06 &&
        std::abs(wrap_angle(row.likely->bearing_rad - trial.right.bearing_rad)) < 3.0 * kRadPerDeg;
  }
  return answer;
}

/// Mean squares of relative range errors over the floor.
struct RepairErrors {
  double before2 = 0.0;
  double repaired2 = 0.0;
  double recalibrated2 = 0.0;
  int n = 0;
  void add(const RepairErrors& other) {
    before2 += other.before2;
    repaired2 += other.repaired2;
    recalibrated2 += other.recalibrated2;
    n += other.n;
  }
  [[nodiscard]] double before() const { return std::sqrt(before2 / n); }
  [[nodiscard]] double repaired() const { return std::sqrt(repaired2 / n); }
  [[nodiscard]] double recalibrated() const { return std::sqrt(recalibrated2 / n); }
};

/// The knock refitted from 10 rows beside a full calibration of the knocked robot on 10 marks of
/// its own. Compared over the floor from 0.3 to 2 m.
inline RepairErrors one_repair(Kind kind, int marks, Dice& dice) {
  const Trial trial = one_trial(kind, 10, marks, dice);
  const Calibrated anew = calibrate(trial.knocked, 10, dice);
  const auto model = knocks_of_rig(trial.calibrated.rig, trial.calibrated.modes);
  const Diagnosis diagnosis =
      diagnose(*model, trial.rows, sighting_noise(), 2.2, [](FloorSpot) { return true; });
  optics::RigGeometry<double> repaired = trial.calibrated.rig;
  if (diagnosis.causes > 0 && diagnosis.hypotheses.front().kind) {
    const Hypothesis& cause = diagnosis.hypotheses.front();
    repaired = knocked(repaired, *cause.kind, cause.amounts);
  }
  RepairErrors errors;
  for (int r = 0; r < 6; ++r) {
    for (int b = 0; b < 12; ++b) {
      const FloorSpot spot{0.3 * std::pow(2.0 / 0.3, r / 5.0),
                           wrap_angle(b * std::numbers::pi / 6.0)};
      const auto at = scene::pixel_of(trial.knocked, spot, kBallHeightM);
      if (!at) continue;
      const auto off = [&](const optics::RigGeometry<double>& rig) {
        const auto floor = optics::pixel_to_floor(rig, at->u_px, at->v_px, kBallHeightM);
        // A pixel beyond the horizon counts as an error of all of the range.
        return floor ? std::pow(std::hypot(floor->x_m, floor->y_m) / spot.range_m - 1.0, 2) : 1.0;
      };
      errors.before2 += off(trial.calibrated.rig);
      errors.repaired2 += off(repaired);
      errors.recalibrated2 += off(anew.rig);
      ++errors.n;
    }
  }
  return errors;
}

}  // namespace rondel::verdict::trials
