#include "calib/link/codebook.h"

#include <algorithm>
#include <cassert>
#include <cmath>
#include <cstddef>
#include <limits>

namespace rondel::link {
namespace {

/// Beyond this the best density alone is as good as the exact search, which would take too long.
constexpr int kMostExactCodes = 1022;

/// The cells of least total cost on a grid of `points` places: ends[k] is the grid index where cell
/// k begins. cost(i, j) is that of a cell from place i to place j. Divide and conquer over the last
/// cell's beginning, which for such costs never moves back as the end moves on.
template <class Cost>
std::vector<int> cheapest_cells(int points, int cells, const Cost& cost) {
  const auto n = static_cast<std::size_t>(points);
  std::vector<double> best(n, std::numeric_limits<double>::infinity());
  std::vector<double> next(n);
  std::vector<std::vector<int>> from(static_cast<std::size_t>(cells), std::vector<int>(n, 0));
  for (int j = 1; j < points; ++j) best[static_cast<std::size_t>(j)] = cost(0, j);
  struct Span {
    int low, high, from_low, from_high;
  };
  std::vector<Span> work;
  for (int k = 1; k < cells; ++k) {
    std::fill(next.begin(), next.end(), std::numeric_limits<double>::infinity());
    std::vector<int>& begin = from[static_cast<std::size_t>(k)];
    work.assign(1, {k + 1, points - 1, k, points - 2});
    while (!work.empty()) {
      const Span span = work.back();
      work.pop_back();
      if (span.low > span.high) continue;
      const int j = (span.low + span.high) / 2;
      double least = std::numeric_limits<double>::infinity();
      int at = span.from_low;
      for (int i = span.from_low; i <= std::min(j - 1, span.from_high); ++i) {
        const double total = best[static_cast<std::size_t>(i)] + cost(i, j);
        if (total < least) {
          least = total;
          at = i;
        }
      }
      next[static_cast<std::size_t>(j)] = least;
      begin[static_cast<std::size_t>(j)] = at;
      work.push_back({span.low, j - 1, span.from_low, at});
      work.push_back({j + 1, span.high, at, span.from_high});
    }
    best.swap(next);
  }
  std::vector<int> ends(static_cast<std::size_t>(cells) + 1);
  ends.back() = points - 1;
  for (int k = cells; k-- > 0;) {
    ends[static_cast<std::size_t>(k)] =
        k == 0 ? 0
               : from[static_cast<std::size_t>(k)]
                     [static_cast<std::size_t>(ends[static_cast<std::size_t>(k) + 1])];
  }
  return ends;
}

/// Integrals of w, w x and w x^2 from the low end to each place of a grid, by Simpson's rule.
struct Moments {
  std::vector<double> x, m0, m1, m2;
};
Moments moments_of(const std::vector<double>& x, const std::function<double(double)>& weight) {
  Moments m{x, {0.0}, {0.0}, {0.0}};
  for (std::size_t i = 1; i < x.size(); ++i) {
    const double width = x[i] - x[i - 1];
    double s0 = 0.0;
    double s1 = 0.0;
    double s2 = 0.0;
    for (int part = 0; part < 3; ++part) {
      const double at = x[i - 1] + 0.5 * part * width;
      const double w = weight(at) * width * (part == 1 ? 4.0 : 1.0) / 6.0;
      s0 += w;
      s1 += w * at;
      s2 += w * at * at;
    }
    m.m0.push_back(m.m0.back() + s0);
    m.m1.push_back(m.m1.back() + s1);
    m.m2.push_back(m.m2.back() + s2);
  }
  return m;
}

/// The centre of mass of `weight` between two places.
double mean_of(double low, double high, int parts, const std::function<double(double)>& weight) {
  double s0 = 0.0;
  double s1 = 0.0;
  for (int i = 0; i <= parts; ++i) {
    const double at = low + (high - low) * i / parts;
    const double w = weight(at) * (i == 0 || i == parts ? 1.0 : (i % 2 == 1 ? 4.0 : 2.0));
    s0 += w;
    s1 += w * at;
  }
  return s0 > 0.0 ? s1 / s0 : 0.5 * (low + high);
}

std::vector<double> log_grid(double low, double high, int points) {
  std::vector<double> x;
  const double ratio = std::log(high / low);
  for (int i = 0; i < points; ++i) x.push_back(low * std::exp(ratio * i / (points - 1)));
  x.back() = high;
  return x;
}

double harmonic_mean(double low, double high) { return 2.0 * low * high / (low + high); }

}  // namespace

int Codebook::code_of(double range_m) const {
  const auto above = std::upper_bound(edges_m.begin() + 1, edges_m.end() - 1, range_m);
  return static_cast<int>(above - edges_m.begin()) - 1;
}

double Codebook::relative_error(int k) const {
  const auto i = static_cast<std::size_t>(k);
  return std::max(std::abs(codes_m[i] / edges_m[i] - 1.0),
                  std::abs(codes_m[i] / edges_m[i + 1] - 1.0));
}

double Codebook::worst_relative_error() const {
  double worst = 0.0;
  for (int k = 0; k < size(); ++k) worst = std::max(worst, relative_error(k));
  return worst;
}

double Codebook::rms_relative_error() const {
  double sum = 0.0;
  for (std::size_t k = 0; k < codes_m.size(); ++k) {
    const double l = edges_m[k];
    const double h = edges_m[k + 1];
    const double c = codes_m[k];
    sum += (h - l) - 2.0 * c * std::log(h / l) + c * c * (1.0 / l - 1.0 / h);
  }
  return std::sqrt(sum / (edges_m.back() - edges_m.front()));
}

double relative_bound(double near_m, double far_m, int codes) {
  return std::tanh(std::log(far_m / near_m) / (2.0 * codes));
}

Codebook relative_codebook(double near_m, double far_m, int codes) {
  Codebook book;
  book.edges_m = log_grid(near_m, far_m, codes + 1);
  for (std::size_t k = 0; k + 1 < book.edges_m.size(); ++k) {
    book.codes_m.push_back(harmonic_mean(book.edges_m[k], book.edges_m[k + 1]));
  }
  return book;
}

Codebook absolute_codebook(double near_m, double far_m, int codes) {
  Codebook book;
  for (int k = 0; k <= codes; ++k) {
    book.edges_m.push_back(near_m + (far_m - near_m) * k / codes);
    if (k > 0)
      book.codes_m.push_back(0.5 *
                             (book.edges_m[static_cast<std::size_t>(k) - 1] + book.edges_m.back()));
  }
  return book;
}

Codebook mean_square_codebook(double low,
                              double high,
                              int codes,
                              const std::function<double(double)>& weight) {
  assert(low < high && codes >= 1);
  // Grid places follow weight^(1/3), the best density for many codes (Panter and Dite 1951), so
  // that every cell spans about as many.
  const int points = codes * std::max(16, 512 / codes) + 1;
  constexpr int kFine = 20000;
  std::vector<double> share = {0.0};
  for (int i = 0; i < kFine; ++i) {
    share.push_back(share.back() + std::cbrt(weight(low + (high - low) * (i + 0.5) / kFine)));
  }
  std::vector<double> x = {low};
  std::size_t i = 0;
  for (int p = 1; p + 1 < points; ++p) {
    const double want = share.back() * p / (points - 1);
    while (share[i + 1] < want) ++i;
    x.push_back(low + (high - low) *
                          (static_cast<double>(i) + (want - share[i]) / (share[i + 1] - share[i])) /
                          kFine);
  }
  x.push_back(high);
  std::vector<int> ends;
  if (codes <= kMostExactCodes) {
    const Moments m = moments_of(x, weight);
    ends = cheapest_cells(points, codes, [&m](int from, int to) {
      const auto a = static_cast<std::size_t>(from);
      const auto b = static_cast<std::size_t>(to);
      const double mass = m.m0[b] - m.m0[a];
      const double first = m.m1[b] - m.m1[a];
      return mass > 0.0 ? m.m2[b] - m.m2[a] - first * first / mass : 0.0;
    });
  } else {
    for (int k = 0; k <= codes; ++k) ends.push_back(k * ((points - 1) / codes));
  }
  Codebook book;
  for (const int end : ends) book.edges_m.push_back(x[static_cast<std::size_t>(end)]);
  book.codes_m.resize(static_cast<std::size_t>(codes));
  // Lloyd's two conditions in turn, until nothing moves.
  const int most_rounds = std::max(50, 2000000 / (16 * codes));
  const int parts = 2 * std::clamp(1024 / codes, 8, 256);  // few cells are wide ones
  double moved = high - low;
  for (int round = 0; round < most_rounds && moved > 1e-9 * (high - low); ++round) {
    moved = 0.0;
    for (std::size_t k = 0; k < book.codes_m.size(); ++k) {
      book.codes_m[k] = mean_of(book.edges_m[k], book.edges_m[k + 1], parts, weight);
    }
    for (std::size_t k = 1; k < book.codes_m.size(); ++k) {
      const double edge = 0.5 * (book.codes_m[k - 1] + book.codes_m[k]);
      moved = std::max(moved, std::abs(edge - book.edges_m[k]));
      book.edges_m[k] = edge;
    }
  }
  return book;
}

double mean_log_error(const Codebook& book, const std::function<double(double)>& noise_m) {
  constexpr int kParts = 8;
  double sum = 0.0;
  for (std::size_t k = 0; k < book.codes_m.size(); ++k) {
    const double l = book.edges_m[k];
    const double h = book.edges_m[k + 1];
    for (int i = 0; i < kParts; ++i) {
      const double noise = noise_m(l * std::pow(h / l, (i + 0.5) / kParts));
      sum += 0.5 * std::log(noise * noise + (h - l) * (h - l) / 12.0) * std::log(h / l) / kParts;
    }
  }
  return sum / std::log(book.edges_m.back() / book.edges_m.front());
}

Codebook noise_matched_codebook(double near_m,
                                double far_m,
                                int codes,
                                const std::function<double(double)>& noise_m) {
  // With cell widths 1/d(x), the mean of ln(noise^2 + 1/(12 d^2)) / x over [near, far] for a given
  // integral of d is least where 12 noise^2 d^3 + d = 1/(price x) (Euler-Lagrange): one root each.
  constexpr int kPoints = 4001;
  const std::vector<double> x = log_grid(near_m, far_m, kPoints);
  std::vector<double> noise2;
  for (const double at : x) noise2.push_back(std::pow(noise_m(at), 2));
  const auto density = [](double s2, double want) {
    // d + 12 s2 d^3 = want: convex and rising, so Newton from above comes down without overshoot.
    double d = want;
    for (int i = 0; i < 200; ++i) {
      const double step = (d + 12.0 * s2 * d * d * d - want) / (1.0 + 36.0 * s2 * d * d);
      d -= step;
      if (step <= 1e-13 * d) break;
    }
    return d;
  };
  std::vector<double> count(x.size());
  const auto count_cells = [&](double price) {
    double last = density(noise2[0], 1.0 / (price * x[0]));
    count[0] = 0.0;
    for (std::size_t i = 1; i < x.size(); ++i) {
      const double d = density(noise2[i], 1.0 / (price * x[i]));
      count[i] = count[i - 1] + 0.5 * (last + d) * (x[i] - x[i - 1]);
      last = d;
    }
    return count.back();
  };
  double cheap = 1e-9;
  double dear = std::log(far_m / near_m);  // at this price even without noise there is one cell
  for (int i = 0; i < 100; ++i) {
    const double price = std::sqrt(cheap * dear);
    (count_cells(price) > codes ? cheap : dear) = price;
  }
  const double all = count_cells(dear);
  Codebook book;
  book.edges_m.push_back(near_m);
  std::size_t i = 0;
  for (int k = 1; k < codes; ++k) {
    const double want = all * k / codes;
    while (count[i + 1] < want) ++i;
    const double part = (want - count[i]) / (count[i + 1] - count[i]);
    book.edges_m.push_back(x[i] + part * (x[i + 1] - x[i]));
  }
  book.edges_m.push_back(far_m);
  for (std::size_t k = 0; k + 1 < book.edges_m.size(); ++k) {
    book.codes_m.push_back(harmonic_mean(book.edges_m[k], book.edges_m[k + 1]));
  }
  return book;
}

Codebook make_codebook(const LinkSpec& link, const std::function<double(double)>& noise_m) {
  const int codes = range_codes(link);
  switch (link.measure) {
    case CodebookMeasure::absolute:
      return absolute_codebook(link.near_m, link.far_m, codes);
    case CodebookMeasure::rms:
      return mean_square_codebook(
          link.near_m, link.far_m, codes, [](double x) { return 1.0 / (x * x); });
    case CodebookMeasure::noise_matched:
      return noise_matched_codebook(link.near_m, link.far_m, codes, noise_m);
    case CodebookMeasure::relative:
      break;
  }
  return relative_codebook(link.near_m, link.far_m, codes);
}

}  // namespace rondel::link
