#include <fmt/format.h>

#include "calib/link/link_plan.h"
#include "tools/firmware/common.h"
#include "tools/firmware/emit.h"
#include "tools/firmware/text.h"

namespace rondel::firmware {

std::string drive_header(const link::BoardTables& tables) {
  const link::ReportLayout report =
      link::report_layout(tables.link, static_cast<int>(tables.objects.size()));
  const auto codes = static_cast<std::uint32_t>(tables.link.bearing_codes);
  Values values = common_values(tables);
  values.emplace_back("unit", std::to_string(tables.range_unit_um));
  values.emplace_back("count", std::to_string(tables.range_units.size()));
  values.emplace_back("ranges", number_lines(tables.range_units));
  values.emplace_back("step", std::to_string(((36000U << 16) + codes / 2) / codes));
  values.emplace_back("body", std::to_string(report.bytes - report.check_bytes));
  std::string out = "/* For the drive board.\n";
  for (const std::string& line : about(tables)) out += fmt::format(" * {}\n", line);
  out += fill(R"( */
#ifndef @P@_DRIVE_H
#define @P@_DRIVE_H

)",
              values);
  out += c_common(tables);
  out += fill(R"(
#define @P@_RANGE_UNIT_UM @unit@u /* ranges are in this many micrometres */

/* What each range code stands for. */
static const uint16_t @p@_ranges[@count@] @P@_ROM = {
@ranges@};

typedef struct {
  uint16_t range;       /* @unit@ um each */
  int16_t bearing_cdeg; /* 1/100 degree, counter-clockwise from forward, -17999 .. 18000 */
} @p@_place;

/* 1 and the place that the codes stand for; 0 for 'not seen', 'beyond' and codes there are none. */
static inline uint8_t @p@_decode(@p@_codes codes, @p@_place *place) {
  uint16_t turn;
  if (codes.range >= @count@u || codes.bearing >= @P@_BEARINGS) return 0;
  place->range = @P@_ROM16(@p@_ranges + codes.range);
  turn = (uint16_t)(((uint32_t)codes.bearing * @step@UL + 32768UL) >> 16);
  place->bearing_cdeg = turn > 18000u ? (int16_t)(turn - 36000u) : (int16_t)turn;
  return 1;
}

/* Takes the line's bytes one by one. Begin with count = 0. */
typedef struct {
  uint8_t bytes[@P@_REPORT_BYTES];
  uint8_t count;
} @p@_line;

/* 1 when `byte` completes a report that checks out. */
static inline uint8_t @p@_take(@p@_line *line, uint8_t byte) {
  if (byte & 128u) {
    line->count = 0; /* only a report's first byte is marked */
  } else if (line->count == 0u) {
    return 0;
  }
  line->bytes[line->count++] = byte;
  if (line->count < @P@_REPORT_BYTES) return 0;
  line->count = 0;
)",
              values);
  if (tables.link.check == CheckByte::sum7) {
    out += fill(R"(  {
    uint8_t sum = 0;
    uint8_t i;
    for (i = 0; i < @body@u; ++i) sum = (uint8_t)(sum + line->bytes[i]);
    return (sum & 127u) == line->bytes[@body@];
  }
}
)",
                values);
  } else if (tables.link.check == CheckByte::crc8) {
    out += fill(R"(  {
    uint8_t crc = 0;
    uint8_t i;
    for (i = 0; i < @body@u; ++i) {
      uint8_t bit;
      crc = (uint8_t)(crc ^ line->bytes[i]);
      for (bit = 0; bit < 8u; ++bit) crc = (uint8_t)((crc << 1) ^ ((crc & 128u) ? 7 : 0));
    }
    return (crc >> 7) == line->bytes[@body@] && (crc & 127u) == line->bytes[@body@ + 1];
  }
}
)",
                values);
  } else {
    out += "  return 1;\n}\n";
  }
  const int per_object = report.bearing_bytes + report.range_bytes;
  std::string get;
  int at = 0;
  const auto take = [&](const char* field, int bytes) {
    const std::string low = at == 0 ? "at[0] & 127u" : fmt::format("at[{}]", at);
    if (bytes == 2) {
      get += fmt::format(
          "  codes.{} = (@p@_code)(((uint16_t)({}) << 7) | at[{}]);\n", field, low, at + 1);
    } else {
      get += fmt::format("  codes.{} = {};\n", field, low);
    }
    at += bytes;
  };
  take("bearing", report.bearing_bytes);
  take("range", report.range_bytes);
  values.emplace_back("per", std::to_string(per_object));
  values.emplace_back("get", fill(get, values));
  out += fill(R"(
/* Codes of object number `object` in the last report. */
static inline @p@_codes @p@_codes_of(const @p@_line *line, uint8_t object) {
  const uint8_t *at = line->bytes + object * @per@u;
  @p@_codes codes;
@get@  return codes;
}

#endif /* @P@_DRIVE_H */
)",
              values);
  return out;
}

}  // namespace rondel::firmware
