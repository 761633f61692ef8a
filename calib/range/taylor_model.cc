#include <fmt/format.h>

#include <Eigen/QR>

#include "calib/range/central_model.h"

namespace rondel::range {
namespace {

/// The polynomial omnidirectional model (Scaramuzza, Martinelli and Siegwart 2006): a line of sight
/// at image radius r goes r outwards for a0 + a2 r^2 + a3 r^3 + ... downwards. The linear term is
/// left out, as there: the image is round and smooth in the middle. r in units of `unit_px`.
class TaylorMeridian {
 public:
  TaylorMeridian(std::vector<double> start, double unit_px, double longest_px)
      : start_(std::move(start)), unit_px_(unit_px), longest_px_(longest_px) {}
  [[nodiscard]] std::vector<Parameter> parameters() const {
    std::vector<Parameter> list;
    for (std::size_t i = 0; i < start_.size(); ++i) {
      const std::string name = fmt::format("a{}", i == 0 ? 0 : i + 1);
      list.push_back(
          {name, start_[i], 0.1 * std::abs(start_[0]), 1.0, name, "", Parameter::Prior::none});
    }
    return list;
  }
  template <class T>
  [[nodiscard]] std::optional<Slope<T>> at(const T* p, const T& radius_px, const T& /*eye*/) const {
    const T r = radius_px / T(unit_px_);
    T sum(0.0);
    for (std::size_t i = start_.size(); i-- > 1;) sum = (sum + p[i]) * r;
    return Slope<T>{r, sum * r + p[0]};
  }
  [[nodiscard]] double longest_px() const { return longest_px_; }

 private:
  std::vector<double> start_;
  double unit_px_;
  double longest_px_;
};

}  // namespace

std::shared_ptr<const Model> make_taylor(const ModelInput& input, const ModelRow& row) {
  const double longest = longest_radius_px(input);
  double unit = 0.0;
  for (const auto& [radius, range] : input.radius_px_range_m) unit = std::max(unit, radius);
  if (!(unit > 0.0)) unit = 0.5 * longest;
  const Parameter eye = eye_parameter(input);
  const auto terms = static_cast<Eigen::Index>(row.order);  // a0, a2 .. a_order
  const auto n = static_cast<Eigen::Index>(input.radius_px_range_m.size());
  Eigen::VectorXd a = Eigen::VectorXd::Zero(terms);
  a[0] = 1.0;
  if (n >= terms) {
    // Proportional error in range, as near as a linear start needs it.
    Eigen::MatrixXd rows(n, terms);
    Eigen::VectorXd down(n);
    for (Eigen::Index i = 0; i < n; ++i) {
      const auto& [radius, range] = input.radius_px_range_m[static_cast<std::size_t>(i)];
      const double r = radius / unit;
      const double want = eye.start * r / range;
      rows(i, 0) = 1.0 / want;
      double power = r;
      for (Eigen::Index k = 1; k < terms; ++k) {
        power *= r;
        rows(i, k) = power / want;
      }
      down[i] = 1.0;
    }
    a = rows.colPivHouseholderQr().solve(down);
  }
  std::vector<double> start(a.data(), a.data() + terms);
  return std::make_shared<CentralModel<TaylorMeridian>>(
      full_name(row), input, row.tilt, TaylorMeridian(std::move(start), unit, longest));
}

}  // namespace rondel::range
