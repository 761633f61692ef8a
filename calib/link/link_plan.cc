#include "calib/link/link_plan.h"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>

#include "calib/base/problem.h"

namespace rondel::link {

ReportLayout report_layout(const LinkSpec& link, int objects) {
  ReportLayout layout;
  layout.bearing_bytes = link.bearing_codes <= 128 ? 1 : 2;
  layout.range_bytes = link.range_bits <= 7 ? 1 : 2;
  // A CRC-8 does not fit beside the mark: it travels as 1 + 7 bits.
  layout.check_bytes = link.check == CheckByte::none ? 0 : link.check == CheckByte::sum7 ? 1 : 2;
  layout.bytes =
      std::max(1, objects * (layout.bearing_bytes + layout.range_bytes)) + layout.check_bytes;
  return layout;
}

ClockError clock_error(double clock_hz, int oversampling, int baud) {
  const double divider =
      std::max(1.0, std::round(clock_hz / (oversampling * static_cast<double>(baud))));
  return {clock_hz,
          oversampling,
          clock_hz / (oversampling * divider) / baud - 1.0,
          oversampling == 16 ? 0.02 : 0.015};
}

LinkPlan plan_link(const LinkSpec& link, int objects, const std::string& where) {
  LinkPlan plan;
  plan.report = report_layout(link, objects);
  plan.report_s = wire_s(link.baud, plan.report.bytes);
  plan.utilisation = plan.report_s * link.reports_per_second;
  plan.worst_age_s = 1.0 / link.reports_per_second + plan.report_s;
  if (plan.utilisation > 1.0) {
    const double most = link.baud / (10.0 * plan.report.bytes);
    throw InputError(
        where,
        fmt::format(
            "link: {} bytes a report x 10 bits a byte x {:g} reports a second = {:.0f} bits a "
            "second, the line carries {}; at most {:.1f} reports a second fit, or take "
            "baud: {:.0f} or more",
            plan.report.bytes,
            link.reports_per_second,
            10.0 * plan.report.bytes * link.reports_per_second,
            link.baud,
            std::floor(10.0 * most) / 10.0,
            std::ceil(10.0 * plan.report.bytes * link.reports_per_second)));
  }
  struct Clock {
    double hz;
    int oversampling;
  };
  constexpr std::array kCommon = {Clock{8e6, 8},
                                  Clock{8e6, 16},
                                  Clock{16e6, 8},
                                  Clock{16e6, 16},
                                  Clock{20e6, 16},
                                  Clock{48e6, 16},
                                  Clock{72e6, 16}};
  for (const Clock& clock : kCommon) {
    const ClockError error = clock_error(clock.hz, clock.oversampling, link.baud);
    plan.clocks.push_back(error);
    if (std::abs(error.relative) <= error.tolerable) continue;
    plan.warnings.push_back(
        fmt::format("a {:g} MHz clock with {}x sampling makes {} baud {:+.2f} % off; a receiver "
                    "stands {:.1f} %",
                    clock.hz * 1e-6,
                    clock.oversampling,
                    link.baud,
                    100.0 * error.relative,
                    100.0 * error.tolerable));
  }
  return plan;
}

}  // namespace rondel::link
