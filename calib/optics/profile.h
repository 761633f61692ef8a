#pragma once

#include <array>
#include <cstddef>
#include <memory>
#include <optional>
#include <utility>
#include <vector>

#include "calib/optics/scalar.h"

namespace rondel::optics {

/// Independent directions in which a measured profile is uncertain.
inline constexpr std::size_t kProfileModes = 3;

/// A mirror's measured profile, smoothed: sag as a cubic spline of the distance from the axis, with
/// the largest modes of its uncertainty. Zero on the axis. Immutable.
///
/// The fit is a penalised regression spline (Eilers and Marx 1996), third differences penalised so
/// that a paraboloid is left alone, the weight of the penalty by generalised cross-validation
/// (Golub, Heath and Wahba 1979). Its covariance is the Bayesian one (Wahba 1983); the modes are
/// that covariance's largest eigenvectors over the profile, one standard deviation each.
class Profile {
 public:
  template <class T>
  struct Surface {
    T sag_m;
    T slope;
  };

  /// Fits points (distance from the axis >= 0, sag), both m, in any order; at least 5 distinct
  /// distances. `sag_sd_m` is the standard deviation of one sag; 0: taken from the scatter.
  /// Throws InputError where the points cannot be a convex mirror's profile.
  static std::shared_ptr<const Profile> fit(std::vector<std::pair<double, double>> points_m,
                                            double sag_sd_m);

  /// Whether the profile speaks about this distance (a little over the last point is allowed).
  [[nodiscard]] bool covers(double s_m) const { return s_m <= reach_m_; }
  [[nodiscard]] double last_point_m() const { return end_m_; }

  /// Standard deviation of the sag at `s_m`, all modes together, m.
  [[nodiscard]] double sag_sd_m(double s_m) const;
  /// Standard deviation of one measured sag as given or found, m.
  [[nodiscard]] double point_sd_m() const { return point_sd_m_; }

  /// Sag and slope at a covered distance.
  template <class T>
  [[nodiscard]] Surface<T> at(const T& s_m, const std::array<T, kProfileModes>& modes) const {
    const std::size_t piece = piece_of(value_of(s_m));
    const T x = s_m - T(static_cast<double>(piece) * step_m_);
    const auto& base = pieces_[0][piece];
    std::array<T, 4> c{T(base[0]), T(base[1]), T(base[2]), T(base[3])};
    for (std::size_t m = 0; m < kProfileModes; ++m) {
      const auto& mode = pieces_[m + 1][piece];
      for (std::size_t k = 0; k < 4; ++k) c[k] = c[k] + modes[m] * T(mode[k]);
    }
    return {((c[3] * x + c[2]) * x + c[1]) * x + c[0],
            (T(3.0) * c[3] * x + T(2.0) * c[2]) * x + c[1]};
  }

  /// The parameter t > 0 at which the ray from + t along meets the profile; along z > 0.
  [[nodiscard]] std::optional<double> meet(double from_x,
                                           double from_y,
                                           double from_z,
                                           double along_x,
                                           double along_y,
                                           double along_z,
                                           const std::array<double, kProfileModes>& modes) const;

  /// 1 / sag'' on the axis, m; the radius of the ball that fits the vertex.
  [[nodiscard]] double vertex_radius_m() const;

 private:
  Profile() = default;
  [[nodiscard]] std::size_t piece_of(double s_m) const;

  using Pieces = std::vector<std::array<double, 4>>;  ///< cubic in (s - piece start), low first
  std::array<Pieces, kProfileModes + 1> pieces_;      ///< the profile, then its modes
  double step_m_ = 0.0;
  double end_m_ = 0.0;
  double reach_m_ = 0.0;
  double point_sd_m_ = 0.0;
  std::vector<double> sd_m_;  ///< sag's standard deviation at equal steps over [0, reach]
};

}  // namespace rondel::optics
