#include <fmt/format.h>

#include <Eigen/QR>

#include "calib/range/central_model.h"

namespace rondel::range {
namespace {

/// Range on the floor as a polynomial in image radius: what people do by hand in a spreadsheet, and
/// the baseline that every other model has to beat. Knows heights only through the eye's.
class PolynomialMeridian {
 public:
  PolynomialMeridian(std::vector<double> start, double unit_px, double longest_px)
      : start_(std::move(start)), unit_px_(unit_px), longest_px_(longest_px) {}
  [[nodiscard]] std::vector<Parameter> parameters() const {
    std::vector<Parameter> list;
    for (std::size_t i = 0; i < start_.size(); ++i) {
      const std::string name = fmt::format("c{}", i);
      list.push_back({name, start_[i], 0.1, 1.0, name, "m", Parameter::Prior::none});
    }
    return list;
  }
  template <class T>
  [[nodiscard]] std::optional<Slope<T>> at(const T* p, const T& radius_px, const T& eye_m) const {
    const T r = radius_px / T(unit_px_);
    T range(0.0);
    for (std::size_t i = start_.size(); i-- > 0;) range = range * r + p[i];
    return Slope<T>{range, eye_m};
  }
  [[nodiscard]] double longest_px() const { return longest_px_; }

 private:
  std::vector<double> start_;
  double unit_px_;
  double longest_px_;
};

}  // namespace

std::shared_ptr<const Model> make_polynomial(const ModelInput& input, const ModelRow& row) {
  const double longest = longest_radius_px(input);
  double unit = 0.0;
  for (const auto& [radius, range] : input.radius_px_range_m) unit = std::max(unit, radius);
  if (!(unit > 0.0)) unit = 0.5 * longest;
  const auto n = static_cast<Eigen::Index>(input.radius_px_range_m.size());
  const Eigen::Index terms = row.order + 1;
  Eigen::VectorXd c = Eigen::VectorXd::Zero(terms);
  c[1] = 1.0;
  if (n >= terms) {
    Eigen::MatrixXd rows(n, terms);
    Eigen::VectorXd range(n);
    for (Eigen::Index i = 0; i < n; ++i) {
      const double r = input.radius_px_range_m[static_cast<std::size_t>(i)].first / unit;
      range[i] = 1.0;
      double power = 1.0 / input.radius_px_range_m[static_cast<std::size_t>(i)].second;
      for (Eigen::Index k = 0; k < terms; ++k) {
        rows(i, k) = power;
        power *= r;
      }
    }
    c = rows.colPivHouseholderQr().solve(range);
  }
  std::vector<double> start(c.data(), c.data() + terms);
  return std::make_shared<CentralModel<PolynomialMeridian>>(
      full_name(row), input, row.tilt, PolynomialMeridian(std::move(start), unit, longest));
}

}  // namespace rondel::range
