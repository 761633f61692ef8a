#pragma once

#include <cstdint>
#include <optional>
#include <span>
#include <string>
#include <vector>

#include "calib/base/progress.h"

// The computer's side of loading tables onto a board: frames of kind, number, body and CRC-16, made
// free of zeros (COBS; Cheshire and Baker 1999) and ended by one. Each is acknowledged.
namespace rondel::firmware {

/// `bytes` without zeros: n bytes become at most n + 1 + n / 254. The ending zero is not included.
[[nodiscard]] std::vector<std::uint8_t> stuff(std::span<const std::uint8_t> bytes);
/// The inverse; no answer for what stuff cannot have made.
[[nodiscard]] std::optional<std::vector<std::uint8_t>> unstuff(std::span<const std::uint8_t> bytes);

inline constexpr std::size_t kBlockBytes = 64;

/// A serial line with a board at its other end.
class Line {
 public:
  Line() = default;
  Line(const Line&) = delete;
  Line& operator=(const Line&) = delete;
  virtual ~Line() = default;
  virtual void write(std::span<const std::uint8_t> bytes) = 0;
  /// The next byte, or none within `timeout_s`.
  [[nodiscard]] virtual std::optional<std::uint8_t> read(double timeout_s) = 0;
};

/// Bytes on the wire, both ways, for an image when nothing goes wrong.
[[nodiscard]] double wire_bytes(std::size_t image_bytes);

struct Transfer {
  bool accepted = false;
  int frames = 0;
  int repeats = 0;  ///< frames that had to be sent again
};

/// Loads a packed binary (link::pack). Each frame is tried `tries` times; goes on where an earlier
/// transfer of the same image was cut off. InputError (`where` names the port) where the board does
/// not answer or refuses.
Transfer send_image(Line& line,
                    std::span<const std::uint8_t> image,
                    int baud,
                    int tries,
                    const std::string& where,
                    Progress& progress);

}  // namespace rondel::firmware
