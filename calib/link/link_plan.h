#pragma once

#include <string>
#include <vector>

#include "calib/venue/spec.h"

namespace rondel::link {

/// How a report is made up.
struct ReportLayout {
  int bearing_bytes = 1;  ///< per object
  int range_bytes = 1;    ///< per object
  int check_bytes = 1;
  int bytes = 0;  ///< of the whole report
};
[[nodiscard]] ReportLayout report_layout(const LinkSpec& link, int objects);

/// How far a board's serial clock is off the wanted rate.
struct ClockError {
  double clock_hz = 0.0;
  int oversampling = 16;
  double relative = 0.0;    ///< actual over wanted, minus 1
  double tolerable = 0.02;  ///< recommended limit of the receiver for 8N1 (AVR data sheets)
};

/// The nearest rate that a clock divided by oversampling x whole number gives.
[[nodiscard]] ClockError clock_error(double clock_hz, int oversampling, int baud);

/// What the line does with the reports.
struct LinkPlan {
  ReportLayout report;
  double report_s = 0.0;     ///< on the wire, 8N1: ten bit times a byte
  double utilisation = 0.0;  ///< part of the line's time
  /// From the moment the frame was taken to the moment its report has arrived and until just before
  /// the next one has: one frame time waiting, the report's time on the wire. What the camera
  /// board needs to find its objects comes on top.
  double worst_age_s = 0.0;
  std::vector<ClockError> clocks;     ///< common ones
  std::vector<std::string> warnings;  ///< pairs whose clocks do not agree at this rate
};

/// Throws InputError (`where` names the file) with the arithmetic where the reports do not fit the
/// line, and what would.
[[nodiscard]] LinkPlan plan_link(const LinkSpec& link, int objects, const std::string& where);

/// Seconds to send `bytes` bytes at 8N1.
[[nodiscard]] constexpr double wire_s(int baud, double bytes) { return 10.0 * bytes / baud; }

}  // namespace rondel::link
