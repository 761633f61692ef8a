#include "calib/range/fit.h"

#include <fmt/format.h>

#include <Eigen/Cholesky>
#include <Eigen/Eigenvalues>
#include <algorithm>
#include <cmath>
#include <complex>
#include <numeric>

#include "calib/base/distribution.h"
#include "calib/base/problem.h"
#include "calib/range/guess.h"
#include "calib/range/observation.h"

namespace rondel::range {
namespace {

using Observations = std::vector<std::unique_ptr<Observation>>;

/// One model fitted to the marks, before anybody chose.
struct Fitted {
  std::shared_ptr<const Model> model;
  ModelInput model_input;
  const ModelRow* row = nullptr;
  Params params;
  Eigen::MatrixXd covariance;
  double noise_scale = 1.0;
  double degrees_of_freedom = std::numeric_limits<double>::infinity();
  double chi_square = 0.0;
  double effective_parameters = 0.0;
  double rms_px = 0.0;
  std::vector<MarkResidual> residuals;
  std::vector<char> used;
  std::vector<std::string> notes;
  double radius_limit_px = 0.0;
  std::string refused;
};

Eigen::VectorXd scales_of(const Model& model) {
  const std::vector<Parameter>& list = model.parameters();
  Eigen::VectorXd scale(static_cast<Eigen::Index>(list.size()));
  for (Eigen::Index i = 0; i < scale.size(); ++i)
    scale[i] = list[static_cast<std::size_t>(i)].scale;
  return scale;
}

/// The prior knowledge as residuals.
Term prior_term(const Model& model) {
  const Eigen::MatrixXd& information = model.prior_information();
  // Rows of the root that say nothing (parameters without a prior) stay zero.
  const Eigen::VectorXd scale = scales_of(model);
  const Eigen::MatrixXd scaled = scale.asDiagonal() * information * scale.asDiagonal();
  const Eigen::SelfAdjointEigenSolver<Eigen::MatrixXd> eigen(scaled);
  const Eigen::MatrixXd root = eigen.eigenvalues().cwiseMax(0.0).cwiseSqrt().asDiagonal() *
                               eigen.eigenvectors().transpose() * scale.cwiseInverse().asDiagonal();
  Term term;
  term.residuals = static_cast<int>(root.rows());
  const Params mean = model.start();
  term.evaluate = [root, mean](const Eigen::VectorXd& shared,
                               const Eigen::VectorXd& /*latent*/,
                               Eigen::VectorXd& residual,
                               Eigen::MatrixXd* by_shared,
                               Eigen::MatrixXd* /*by_latent*/) {
    residual = root * (shared - mean);
    if (by_shared != nullptr) *by_shared = root;
    return true;
  };
  return term;
}

/// Sums what observations say about the parameters.
struct Information {
  Eigen::MatrixXd matrix;
  double chi_square = 0.0;
  int values = 0;
};

void add(const Linear& linear, Information& information) {
  const Eigen::LLT<Eigen::MatrixXd> root(linear.covariance);
  const Eigen::MatrixXd g = root.matrixL().solve(linear.by_params);
  const Eigen::VectorXd e = root.matrixL().solve(linear.residual);
  information.matrix += g.transpose() * g;
  information.chi_square += e.squaredNorm();
}

/// The inverse of an information matrix; directions of which nothing is known get a large variance
/// instead of none.
Eigen::MatrixXd inverse_information(const Eigen::MatrixXd& information,
                                    const Eigen::VectorXd& scale) {
  Eigen::MatrixXd scaled = scale.asDiagonal() * information * scale.asDiagonal();
  scaled.diagonal().array() += 1e-8;
  const auto n = scaled.rows();
  const Eigen::MatrixXd inverse = scaled.ldlt().solve(Eigen::MatrixXd::Identity(n, n));
  return scale.asDiagonal() * inverse * scale.asDiagonal();
}

class ModelFit {
 public:
  ModelFit(const FitInput& input, std::shared_ptr<const Model> model)
      : input_(input), model_(std::move(model)), scale_(scales_of(*model_)) {
    if (input.rim_centre) frame_.push_back(observe_rim_centre(*input.rim_centre));
    if (input.reflection) frame_.push_back(observe_reflection(*input.reflection));
  }

  Fitted run() {
    Fitted fitted;
    fitted.model = model_;
    const std::size_t n = input_.marks.size();
    fitted.used.assign(n, 1);
    make_marks(1.0);
    params_ = model_->start();
    // A curve of k free numbers needs k marks, and one more to be held against.
    std::vector<std::string> shape;
    for (const Parameter& p : model_->parameters()) {
      if (p.prior != Parameter::Prior::known && p.name != "eye_height_m" &&
          p.name != "heading_rad") {
        shape.push_back(p.shown_name);
      }
    }
    if (!shape.empty() && n < shape.size() + 1) {
      return refuse(fitted,
                    fmt::format("{} cannot be told apart by {} mark{}; it takes at least {}, at "
                                "different ranges, or a drawing in rig.yaml",
                                fmt::join(shape, ", "),
                                n,
                                n == 1 ? "" : "s",
                                shape.size() + 1));
    }
    for (std::size_t i = 0; i < n; ++i)
      fitted.used[i] = marks_[i]->linear(*model_, params_) ? 1 : 0;
    if (n > 0 && !settle(fitted)) return fitted;
    if (n == 0) {
      const LeastSquaresSolution only = solve(problem(fitted.used, 0.0));
      if (!only.usable) return refuse(fitted, "the frame's own centre contradicts the drawing");
      params_ = only.shared;
    }
    finish(fitted);
    return fitted;
  }

 private:
  void make_marks(double noise_scale) {
    marks_.clear();
    for (const MarkInput& mark : input_.marks) marks_.push_back(observe_mark(mark, noise_scale));
  }

  static Fitted& refuse(Fitted& fitted, std::string why) {
    fitted.refused = std::move(why);
    return fitted;
  }

  [[nodiscard]] LeastSquaresProblem problem(const std::vector<char>& used, double cauchy) const {
    LeastSquaresProblem p;
    p.start = params_;
    p.scale = scale_;
    p.cauchy = cauchy;
    p.tolerance = cauchy > 0.0 ? 1e-5 : 1e-9;  // of what is a few tens: far below one deviation
    p.terms.push_back(prior_term(*model_));
    for (const auto& seen : frame_) {
      if (seen->linear(*model_, params_)) p.terms.push_back(seen->term(*model_, params_));
    }
    for (std::size_t i = 0; i < marks_.size(); ++i) {
      if (used[i] != 0) p.terms.push_back(marks_[i]->term(*model_, params_));
    }
    return p;
  }

  [[nodiscard]] Information information(const std::vector<char>& used) const {
    Information sum;
    sum.matrix = model_->prior_information();
    for (const auto& seen : frame_) {
      if (const auto linear = seen->linear(*model_, params_)) {
        add(*linear, sum);
        sum.values += 2;
      }
    }
    for (std::size_t i = 0; i < marks_.size(); ++i) {
      if (used[i] == 0) continue;
      if (const auto linear = marks_[i]->linear(*model_, params_)) {
        add(*linear, sum);
        sum.values += values_of(i);
      }
    }
    return sum;
  }

  [[nodiscard]] int values_of(std::size_t mark) const {
    return input_.marks[mark].bearing_rad ? 2 : 1;
  }

  /// For every mark how far it is from what the others say, and how likely that is by chance.
  struct Outlook {
    bool seen = false;
    Eigen::Vector2d fitted_residual = Eigen::Vector2d::Zero();
    Eigen::Vector2d prediction = Eigen::Vector2d::Zero();  ///< leave-one-out residual, px
    double square = 0.0;                                   ///< in standard deviations
    Params without;                                        ///< parameters without it
  };
  [[nodiscard]] std::vector<Outlook> outlook(const std::vector<char>& used) const {
    const Eigen::MatrixXd covariance = inverse_information(information(used).matrix, scale_);
    std::vector<Outlook> list(marks_.size());
    for (std::size_t i = 0; i < marks_.size(); ++i) {
      const auto linear = marks_[i]->linear(*model_, params_);
      if (!linear) continue;
      Outlook& o = list[i];
      o.seen = true;
      o.fitted_residual = linear->residual;
      const Eigen::MatrixXd& g = linear->by_params;
      const Eigen::MatrixXd h = g * covariance * g.transpose();
      const Eigen::MatrixXd& w = linear->covariance;
      if (used[i] != 0) {
        // e = (1 - h w^-1) (residual without it), whose covariance is w (w - h)^-1 w.
        const Eigen::Matrix2d rest = w - h;
        o.prediction = w * rest.ldlt().solve(linear->residual);
        o.square = std::max(0.0, linear->residual.dot(rest.ldlt().solve(linear->residual)));
        o.without = params_ - covariance * g.transpose() * w.ldlt().solve(o.prediction);
      } else {
        const Eigen::Matrix2d total = w + h;
        o.prediction = linear->residual;
        o.square = linear->residual.dot(total.ldlt().solve(linear->residual));
        o.without = params_;
      }
    }
    return list;
  }

  /// Solves, sets marks aside that the others contradict, and finds the noise's scale.
  bool settle(Fitted& fitted) {
    const std::size_t n = marks_.size();
    std::vector<char>& used = fitted.used;
    if (std::count(used.begin(), used.end(), 1) == 0) {
      refuse(fitted, "none of the marks lies on the curve that the fit starts from");
      return false;
    }
    // Plain squares first: from the bare start, with so much known beforehand, a robust loss may
    // take a far mark that ought to move the parameters for a wrong one.
    const LeastSquaresSolution first = solve(problem(used, 0.0));
    if (first.usable) {
      params_ = first.shared;
      // Of so few marks none can be called wrong while all of them together are likely enough.
      constexpr std::size_t kFew = 5;
      const Information sum = information(used);
      if (n <= kFew && chi_square_tail(chi_square(sum), std::max(1.0, freedom(sum))) > 0.01) {
        return scale_noise(fitted);
      }
    }
    const LeastSquaresSolution robust = solve(problem(used, 2.0));
    if (!robust.usable) {
      refuse(fitted, "the fit does not settle");
      return false;
    }
    params_ = robust.shared;
    for (int round = 0; round < 10; ++round) {
      const std::vector<char> wrong = contradicted(used);
      std::vector<char> next(n, 1);
      for (std::size_t i = 0; i < n; ++i) next[i] = wrong[i] != 0 ? 0 : 1;
      if (2 * std::count(wrong.begin(), wrong.end(), 1) >= static_cast<std::ptrdiff_t>(n) &&
          n > 1) {
        // Most cannot be wrong: the model or the noise is. Keep what the robust fit found.
        if (round > 0) {
          next = used;
        } else {
          for (std::size_t i = 0; i < n; ++i) next[i] = marks_[i]->linear(*model_, params_) ? 1 : 0;
        }
      }
      const bool same = next == used && round > 0;
      used = next;
      const LeastSquaresSolution plain = solve(problem(used, 0.0));
      if (!plain.usable) {
        refuse(fitted, "the fit does not settle");
        return false;
      }
      params_ = plain.shared;
      if (same) break;
    }
    return scale_noise(fitted);
  }

  /// The marks that the others contradict, as the parameters are now.
  [[nodiscard]] std::vector<char> contradicted(const std::vector<char>& used) const {
    const std::vector<Outlook> list = outlook(used);
    // The bulk of the marks says how large the noise is before any of them is called wrong.
    const double bulk = bulk_scale(list);
    const double chance = 0.02 / static_cast<double>(list.size());
    std::vector<char> wrong(list.size(), 0);
    for (std::size_t i = 0; i < list.size(); ++i) {
      const double square = list[i].square / (bulk * bulk);
      const double p =
          values_of(i) == 2 ? std::exp(-0.5 * square) : std::erfc(std::sqrt(0.5 * square));
      wrong[i] = !list[i].seen || p < chance ? 1 : 0;
    }
    return wrong;
  }

  /// Noise larger than assumed: the band has to say so.
  bool scale_noise(Fitted& fitted) {
    const std::vector<char>& used = fitted.used;
    double scale = 1.0;
    for (int round = 0; round < 3; ++round) {
      const Information sum = information(used);
      const double dof = freedom(sum);
      if (dof < 1.0) break;
      const double square = chi_square(sum);
      if (scale == 1.0 && chi_square_tail(square, dof) > 0.01) break;
      scale *= std::sqrt(std::max(square / dof, 1.0));
      fitted.degrees_of_freedom = dof;
      make_marks(scale);
      const LeastSquaresSolution wider = solve(problem(used, 0.0));
      if (wider.usable) params_ = wider.shared;
    }
    fitted.noise_scale = scale;
    return true;
  }

  /// By how much the marks' scatter exceeds the assumed noise, from the median; 1 unless clearly.
  [[nodiscard]] double bulk_scale(const std::vector<Outlook>& list) const {
    std::vector<double> ratios;
    for (std::size_t i = 0; i < list.size(); ++i) {
      if (list[i].seen) ratios.push_back(list[i].square / (values_of(i) == 2 ? 1.3863 : 0.4549));
    }
    if (ratios.size() < 4) return 1.0;
    const auto middle = ratios.begin() + static_cast<std::ptrdiff_t>(ratios.size() / 2);
    std::nth_element(ratios.begin(), middle, ratios.end());
    const double limit = 1.0 + 5.0 / std::sqrt(static_cast<double>(ratios.size()));
    return *middle > limit ? std::sqrt(*middle) : 1.0;
  }

  [[nodiscard]] double freedom(const Information& sum) const {
    int open = 0;
    for (const Parameter& p : model_->parameters())
      open += p.prior == Parameter::Prior::none ? 1 : 0;
    return sum.values - open;
  }
  /// Of data and prior together.
  [[nodiscard]] double chi_square(const Information& sum) const {
    const Params off = params_ - model_->start();
    return sum.chi_square + off.dot(model_->prior_information() * off);
  }

  void finish(Fitted& fitted) {
    fitted.params = params_;
    const Information sum = information(fitted.used);
    fitted.chi_square = chi_square(sum);
    fitted.covariance = inverse_information(sum.matrix, scale_);
    fitted.effective_parameters = static_cast<double>(params_.size()) -
                                  (fitted.covariance * model_->prior_information()).trace();
    const std::vector<Outlook> list = outlook(fitted.used);
    double square = 0.0;
    int values = 0;
    for (std::size_t i = 0; i < list.size(); ++i) {
      const MarkInput& mark = input_.marks[i];
      MarkResidual r;
      r.mark = static_cast<int>(i);
      r.flagged = fitted.used[i] == 0;
      if (list[i].seen) {
        r.du_px = list[i].fitted_residual[0];
        r.dv_px = list[i].fitted_residual[1];
        r.studentised = std::sqrt(list[i].square);
        const auto place = model_->place(list[i].without, mark.pixel, mark.height_m);
        r.leave_one_out_relative = place ? to_spot(*place).range_m / mark.range_m - 1.0 : 1.0;
        if (!r.flagged) {
          square += list[i].fitted_residual.squaredNorm();
          values += values_of(i);
        }
      } else {
        r.studentised = std::numeric_limits<double>::infinity();
        r.leave_one_out_relative = 1.0;
      }
      fitted.residuals.push_back(r);
    }
    fitted.rms_px = values > 0 ? std::sqrt(square / values) : 0.0;
    check(fitted, sum);
  }

  /// Monotone, and held by the marks?
  void check(Fitted& fitted, const Information& sum) {
    const double longest =
        0.75 * std::hypot(input_.rig.camera.width_px, input_.rig.camera.height_px);
    const ImagePoint centre = input_.rim_centre
                                  ? input_.rim_centre->at
                                  : ImagePoint{0.5 * (input_.rig.camera.width_px - 1),
                                               0.5 * (input_.rig.camera.height_px - 1)};
    double farthest_mark = 0.0;
    for (std::size_t i = 0; i < input_.marks.size(); ++i) {
      const MarkInput& m = input_.marks[i];
      if (fitted.used[i] == 0) continue;
      farthest_mark = std::max(farthest_mark,
                               std::hypot(m.pixel.u_px - centre.u_px, m.pixel.v_px - centre.v_px));
    }
    fitted.radius_limit_px = longest;
    for (int k = 0; k < 16; ++k) {
      const double azimuth = 2.0 * std::numbers::pi * k / 16;
      double last = 0.0;
      bool entered = false;
      for (double radius = 2.0; radius <= longest; radius += 1.0) {
        const auto place = model_->place(
            params_,
            {centre.u_px + radius * std::cos(azimuth), centre.v_px + radius * std::sin(azimuth)},
            0.0);
        if (!place) {
          if (entered) break;
          continue;
        }
        // In the very middle a decentred curve may still come down before it climbs.
        const double range = to_spot(*place).range_m;
        if (entered && range <= last && radius > 12.0) {
          fitted.radius_limit_px = std::min(fitted.radius_limit_px, radius - 1.0);
          break;
        }
        last = range;
        entered = true;
      }
    }
    if (fitted.radius_limit_px < farthest_mark - 1.0) {
      refuse(fitted,
             fmt::format("range falls with radius from {:.0f} px on, inside the marks' own span",
                         fitted.radius_limit_px));
      return;
    }
    identify(fitted, sum);
  }

  /// Parameters that the marks cannot tell apart, where that matters for the marks' own floor.
  void identify(Fitted& fitted, const Information& /*sum*/) {
    const bool drawn = std::all_of(
        model_->parameters().begin(), model_->parameters().end(), [](const Parameter& p) {
          return p.prior == Parameter::Prior::known;
        });
    if (drawn) return;
    double worst = 0.0;
    ByParams gradient;
    for (std::size_t i = 0; i < input_.marks.size(); ++i) {
      if (fitted.used[i] == 0) continue;
      const auto placed = model_->locate(params_, input_.marks[i].pixel, input_.marks[i].height_m);
      if (!placed) continue;
      const double range = to_spot(placed->at).range_m;
      const Eigen::RowVectorXd by =
          (placed->at.x_m * placed->by_params.row(0) + placed->at.y_m * placed->by_params.row(1)) /
          (range * range);
      const double sd = std::sqrt(std::max(0.0, (by * fitted.covariance * by.transpose()).value()));
      if (sd > worst) {
        worst = sd;
        gradient = by.replicate(2, 1);
      }
    }
    if (worst < 0.3 && worst > 0.0) return;
    // The direction in which the answer is loose, in natural steps of the parameters.
    std::vector<std::string> names;
    if (gradient.size() > 0) {
      const Eigen::VectorXd loose =
          scale_.cwiseInverse().asDiagonal() * (fitted.covariance * gradient.row(0).transpose());
      const double most = loose.cwiseAbs().maxCoeff();
      for (Eigen::Index k = 0; k < loose.size(); ++k) {
        if (std::abs(loose[k]) > 0.3 * most) {
          names.push_back(model_->parameters()[static_cast<std::size_t>(k)].shown_name);
        }
      }
    }
    refuse(
        fitted,
        fmt::format("{} cannot be told apart by {} marks; measure at ranges and bearings far from "
                    "the ones there are",
                    fmt::join(names, ", "),
                    std::count(fitted.used.begin(), fitted.used.end(), 1)));
  }

  const FitInput& input_;
  std::shared_ptr<const Model> model_;
  Eigen::VectorXd scale_;
  Observations frame_;
  Observations marks_;
  Params params_;
};

// ---- which way round -------------------------------------------------------------------------

struct Turn {
  double heading_rad = 0.0;
  double concentration = 0.0;  ///< length of the mean direction, 0 .. 1
};

Turn turn_of(const FitInput& input, ImagePoint centre, bool mirrored) {
  std::complex<double> sum = 0.0;
  int n = 0;
  for (const MarkInput& mark : input.marks) {
    if (!mark.bearing_rad) continue;
    const double azimuth = std::atan2(mark.pixel.v_px - centre.v_px, mark.pixel.u_px - centre.u_px);
    sum += std::polar(1.0, *mark.bearing_rad - (mirrored ? azimuth : -azimuth));
    ++n;
  }
  if (n == 0) return {};
  return {std::arg(sum), std::abs(sum) / n};
}

void decide_turn(const FitInput& input, ModelInput& model, std::vector<std::string>& notes) {
  const MountingSpec& mounting = input.rig.mounting;
  const ImagePoint centre = input.rim_centre ? input.rim_centre->at
                                             : ImagePoint{0.5 * (input.rig.camera.width_px - 1),
                                                          0.5 * (input.rig.camera.height_px - 1)};
  const auto with_bearing =
      std::count_if(input.marks.begin(), input.marks.end(), [](const MarkInput& m) {
        return m.bearing_rad.has_value();
      });
  const Turn as_mirrored = turn_of(input, centre, true);
  const Turn as_plain = turn_of(input, centre, false);
  const bool seen_mirrored = as_mirrored.concentration >= as_plain.concentration;
  const Turn& seen = seen_mirrored ? as_mirrored : as_plain;
  const Turn& other = seen_mirrored ? as_plain : as_mirrored;
  // Two marks nearly opposite fit both ways; only a clear difference decides.
  const bool clear = with_bearing >= 2 && seen.concentration > 0.9 && other.concentration < 0.8;
  model.mirrored = mounting.mirrored.value_or(clear ? seen_mirrored : true);
  if (mounting.mirrored && clear && *mounting.mirrored != seen_mirrored) {
    throw InputError("rig.yaml",
                     fmt::format("mirrored: {} contradicts the bearings of {} marks, which fit "
                                 "'mirrored: {}'; correct rig.yaml, or the sign of the bearings",
                                 *mounting.mirrored,
                                 with_bearing,
                                 seen_mirrored));
  }
  if (!mounting.mirrored) {
    if (clear) {
      notes.push_back(
          fmt::format("mirrored: {} (from the bearings of {} marks)", seen_mirrored, with_bearing));
    } else {
      notes.emplace_back(
          "mirrored: true is assumed; the marks' bearings cannot decide it, rig.yaml can");
    }
  }
  const Turn& turn = model.mirrored ? as_mirrored : as_plain;
  if (with_bearing == 0) {
    model.heading = ModelInput::Heading::fixed;
    model.heading_rad = mounting.heading_rad.value_or(0.0);
    if (!mounting.heading_rad) {
      notes.emplace_back(
          "heading 0 deg is assumed: no mark has a bearing; bearings count from the image's u "
          "axis");
    }
    return;
  }
  if (!mounting.heading_rad) {
    model.heading = ModelInput::Heading::free;
    model.heading_rad = turn.heading_rad;
    return;
  }
  model.heading = ModelInput::Heading::known;
  model.heading_rad = *mounting.heading_rad;
  const double off = wrap_angle(turn.heading_rad - model.heading_rad);
  if (with_bearing >= 2 && turn.concentration > 0.9 &&
      std::abs(off) > 5.0 * input.mounting.heading_rad) {
    notes.push_back(
        fmt::format("rig.yaml says heading {:.1f} deg, but the marks say {:.1f} deg; the marks are "
                    "followed, correct rig.yaml",
                    model.heading_rad * kDegPerRad,
                    turn.heading_rad * kDegPerRad));
    model.heading = ModelInput::Heading::free;
    model.heading_rad = turn.heading_rad;
  }
}

ModelInput model_input_of(const FitInput& input, std::vector<std::string>& notes) {
  ModelInput model;
  model.rig = input.rig;
  model.mounting = input.mounting;
  model.rim_centre = input.rim_centre;
  decide_turn(input, model, notes);
  const ImagePoint centre = input.rim_centre ? input.rim_centre->at
                                             : ImagePoint{0.5 * (input.rig.camera.width_px - 1),
                                                          0.5 * (input.rig.camera.height_px - 1)};
  const double eye = input.rig.mounting.eye_height_m ? input.rig.mounting.eye_height_m->value : 0.2;
  for (const MarkInput& m : input.marks) {
    const double drop = std::max(0.1, 1.0 - m.height_m / eye);
    model.radius_px_range_m.emplace_back(
        std::hypot(m.pixel.u_px - centre.u_px, m.pixel.v_px - centre.v_px), m.range_m / drop);
  }
  return model;
}

// ---- choice ----------------------------------------------------------------------------------

double leave_one_out(const Fitted& fitted, const std::vector<char>& counted) {
  double sum = 0.0;
  int n = 0;
  for (const MarkResidual& r : fitted.residuals) {
    if (counted[static_cast<std::size_t>(r.mark)] == 0) continue;
    sum += r.leave_one_out_relative * r.leave_one_out_relative;
    ++n;
  }
  return n > 0 ? std::sqrt(sum / n) : 0.0;
}

/// Whether `later` predicts left-out marks better than `first` by more than chance: the mean of the
/// paired differences of squared relative errors over its standard error.
bool clearly_better(const Fitted& later, const Fitted& first, const std::vector<char>& counted) {
  double sum = 0.0;
  double square = 0.0;
  int n = 0;
  for (std::size_t i = 0; i < counted.size(); ++i) {
    if (counted[i] == 0) continue;
    const double d = std::pow(first.residuals[i].leave_one_out_relative, 2) -
                     std::pow(later.residuals[i].leave_one_out_relative, 2);
    sum += d;
    square += d * d;
    ++n;
  }
  if (n < 4) return false;
  const double mean = sum / n;
  const double variance = std::max(0.0, square / n - mean * mean) / (n - 1);
  return mean > student_quantile(0.975, n - 1) * std::sqrt(variance);
}

/// A drawing with everything in it, unless another model is clearly better: what is known
/// beforehand is worth more than a close call. Without a drawing the model with the smallest
/// leave-one-out error; near ties go to fewer parameters. Nothing where none can be used.
const Fitted* choose(const std::vector<Fitted>& all) {
  constexpr double kTie = 1.1;
  std::vector<const Fitted*> running;
  for (const Fitted& fitted : all) {
    if (fitted.refused.empty()) running.push_back(&fitted);
  }
  if (running.empty()) return nullptr;
  // A model must not win by setting marks aside: those count that most models keep.
  std::vector<char> counted(running.front()->used.size(), 0);
  for (std::size_t i = 0; i < counted.size(); ++i) {
    const auto keep = std::count_if(
        running.begin(), running.end(), [&](const Fitted* f) { return f->used[i] != 0; });
    counted[i] = 2 * keep >= static_cast<std::ptrdiff_t>(running.size()) ? 1 : 0;
  }
  const Fitted* chosen = running.front();
  if (chosen->row->needs_drawing) {
    for (const Fitted* fitted : running) {
      if (clearly_better(*fitted, *chosen, counted)) chosen = fitted;
    }
    return chosen;
  }
  for (const Fitted* fitted : running) {
    if (leave_one_out(*fitted, counted) < leave_one_out(*chosen, counted)) chosen = fitted;
  }
  const Fitted* best = chosen;
  for (const Fitted* fitted : running) {
    if (fitted->params.size() < chosen->params.size() &&
        leave_one_out(*fitted, counted) <= kTie * leave_one_out(*best, counted) &&
        !clearly_better(*best, *fitted, counted)) {
      chosen = fitted;
    }
  }
  return chosen;
}

}  // namespace

FitResult fit_range(const FitInput& input) {
  FitResult result;
  ModelInput model_input = model_input_of(input, result.notes);
  const bool drawn = input.rig.mirror && input.rig.camera.focal_px;
  if (input.marks.empty() && !drawn) {
    throw InputError("marks.csv",
                     "no marks, and no drawing in rig.yaml: nothing says how far a pixel sees; "
                     "measure marks, or fill in mirror: and camera: focal_px");
  }

  std::vector<Fitted> all;
  for (const ModelRow& row : model_table()) {
    if (!input.only_model.empty() && full_name(row) != input.only_model) continue;
    if (row.needs_drawing && !drawn) continue;
    if (!row.needs_drawing && input.marks.size() < 3 && drawn) continue;
    const std::shared_ptr<const Model> model = row.make(model_input, row);
    Fitted fitted = ModelFit(input, model).run();
    fitted.row = &row;
    fitted.model_input = model_input;
    all.push_back(std::move(fitted));
  }

  const Fitted* chosen = choose(all);
  if (chosen == nullptr) {
    if (all.empty()) {
      throw InputError("--model",
                       fmt::format("'{}' needs a drawing in rig.yaml", input.only_model));
    }
    // All fail for want of marks, or alike: the first says it.
    throw InputError("marks.csv",
                     fmt::format("{}: {}", full_name(*all.front().row), all.front().refused));
  }

  for (const Fitted& fitted : all) {
    Candidate c;
    c.model = full_name(*fitted.row);
    c.parameters = static_cast<int>(fitted.model->parameters().size());
    c.refused = fitted.refused;
    if (!fitted.residuals.empty()) {
      c.effective_parameters = fitted.effective_parameters;
      c.rms_px = fitted.rms_px;
      c.leave_one_out_relative = leave_one_out(fitted, chosen->used);
    }
    result.candidates.push_back(std::move(c));
  }

  const double t95 = std::isfinite(chosen->degrees_of_freedom)
                         ? student_quantile(0.975, chosen->degrees_of_freedom)
                         : normal_quantile(0.975);
  const ImagePoint centre = input.rim_centre ? input.rim_centre->at
                                             : ImagePoint{0.5 * (input.rig.camera.width_px - 1),
                                                          0.5 * (input.rig.camera.height_px - 1)};
  result.curve = std::make_shared<RangeCurve>(
      chosen->model, chosen->params, chosen->covariance, t95, centre, chosen->radius_limit_px);
  result.model_input = chosen->model_input;
  result.model = full_name(*chosen->row);
  for (std::size_t i = 0; i < chosen->model->parameters().size(); ++i) {
    const auto k = static_cast<Eigen::Index>(i);
    result.parameters.push_back({chosen->model->parameters()[i],
                                 chosen->params[k],
                                 std::sqrt(std::max(0.0, chosen->covariance(k, k)))});
  }
  result.marks = static_cast<int>(std::count(chosen->used.begin(), chosen->used.end(), 1));
  result.rms_px = chosen->rms_px;
  result.leave_one_out_relative = leave_one_out(*chosen, chosen->used);
  result.noise_scale = chosen->noise_scale;
  result.degrees_of_freedom = chosen->degrees_of_freedom;
  result.residuals = chosen->residuals;
  result.flagged = flagged_marks(input, *result.curve, result.residuals, chosen->noise_scale);
  if (chosen->noise_scale > 1.0) {
    result.notes.push_back(
        fmt::format("the marks scatter {:.1f} times as much as assumed; the band has been widened",
                    chosen->noise_scale));
  }
  result.reach_m = reach_m(*result.curve, input.tolerance, 0.0, input.near_m, input.far_m);
  return result;
}

}  // namespace rondel::range
