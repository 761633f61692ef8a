#include "tools/firmware/common.h"

#include <fmt/format.h>

#include "calib/link/link_plan.h"
#include "tools/firmware/text.h"

namespace rondel::firmware {

Values common_values(const link::BoardTables& tables) {
  const std::string prefix = identifier(tables.prefix);
  return {{"p", prefix}, {"P", upper(prefix)}, {"id", fmt::format("{:08X}", tables.identity)}};
}

std::vector<std::string> about(const link::BoardTables& tables) {
  const link::ReportLayout report =
      link::report_layout(tables.link, static_cast<int>(tables.objects.size()));
  const char* check = tables.link.check == CheckByte::sum7   ? "; last byte: their sum, 7 bits"
                      : tables.link.check == CheckByte::crc8 ? "; last two: CRC-8, 1 + 7 bits"
                                                             : "";
  std::vector<std::string> lines = {
      fmt::format("Tables of '{}', identity {:08X}. Made by rondel; not to be edited.",
                  for_comment(tables.venue),
                  tables.identity),
      fmt::format("Image {} x {} px; ranges {:g} to {:g} m in {} codes of {} bits, {} bearings.",
                  tables.width_px,
                  tables.height_px,
                  tables.link.near_m,
                  tables.link.far_m,
                  tables.range_codes(),
                  tables.link.range_bits,
                  tables.link.bearing_codes),
      fmt::format("Report: {} bytes, the first with its top bit set; bearing and range of each "
                  "object{}.",
                  report.bytes,
                  check),
      fmt::format("{} baud, 8N1, {:g} reports a second.",
                  tables.link.baud,
                  tables.link.reports_per_second)};
  for (std::size_t i = 0; i < tables.objects.size(); ++i) {
    lines.push_back(fmt::format("Object {}: {}, measured {:.1f} mm above the floor.",
                                i,
                                for_comment(tables.objects[i].name),
                                1e3 * tables.objects[i].height_m));
  }
  return lines;
}

std::string c_common(const link::BoardTables& tables) {
  Values values = common_values(tables);
  const bool small = tables.link.range_bits <= 8 && tables.link.bearing_codes <= 256;
  values.emplace_back("code", small ? "uint8_t" : "uint16_t");
  values.emplace_back("beyond", std::to_string(tables.beyond_code()));
  values.emplace_back("not_seen", std::to_string(tables.not_seen_code()));
  values.emplace_back("objects", std::to_string(tables.objects.size()));
  values.emplace_back("bearings", std::to_string(tables.link.bearing_codes));
  values.emplace_back(
      "report_bytes",
      std::to_string(
          link::report_layout(tables.link, static_cast<int>(tables.objects.size())).bytes));
  return fill(R"(#include <stdint.h>

#if (-1 >> 1) != -1
#error "this code needs a compiler whose right shift of negative numbers keeps the sign"
#endif

/* Of the camera board's and the drive board's files: both must have been made together. */
#if defined(@P@_IDENTITY) && @P@_IDENTITY != 0x@id@UL
#error "the camera board's and the drive board's tables were not made together"
#endif

#ifndef @P@_COMMON
#define @P@_COMMON

#define @P@_IDENTITY 0x@id@UL
#define @P@_OBJECTS @objects@u
#define @P@_BEARINGS @bearings@u
#define @P@_BEYOND @beyond@u       /* range code: farther than the last code, or past the horizon */
#define @P@_NOT_SEEN @not_seen@u   /* range code: the object is not in the frame */
#define @P@_REPORT_BYTES @report_bytes@u

/* Where tables live and how they are read there. */
#if defined(__AVR__)
#include <avr/pgmspace.h>
#define @P@_ROM PROGMEM
#define @P@_ROM8(at) pgm_read_byte(at)
#define @P@_ROM16(at) pgm_read_word(at)
#define @P@_ROM32(at) pgm_read_dword(at)
#else
#define @P@_ROM
#define @P@_ROM8(at) (*(at))
#define @P@_ROM16(at) (*(at))
#define @P@_ROM32(at) (*(at))
#endif

typedef @code@ @p@_code;
typedef struct {
  @p@_code range;
  @p@_code bearing;
} @p@_codes;

#endif /* @P@_COMMON */
)",
              values);
}

}  // namespace rondel::firmware
