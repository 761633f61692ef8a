#include "vision/frames/load.h"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <atomic>
#include <cctype>
#include <cmath>
#include <cstdint>
#include <cstring>
#include <opencv2/imgcodecs.hpp>
#include <optional>
#include <thread>
#include <utility>

#include "calib/base/file.h"
#include "calib/venue/words.h"

namespace rondel::vision {
namespace {

enum class Format { png, jpeg, bmp, netpbm, rgb565, unknown };

std::string ending_of(const std::filesystem::path& path) {
  std::string ending = path.extension().string();
  for (char& c : ending) c = static_cast<char>(std::tolower(static_cast<unsigned char>(c)));
  return ending;
}

Format format_of_name(const std::filesystem::path& path) {
  const std::string ending = ending_of(path);
  if (ending == ".png") return Format::png;
  if (ending == ".jpg" || ending == ".jpeg") return Format::jpeg;
  if (ending == ".bmp") return Format::bmp;
  if (ending == ".ppm" || ending == ".pgm") return Format::netpbm;
  if (ending == ".565" || ending == ".rgb565") return Format::rgb565;
  return Format::unknown;
}

constexpr std::string_view kPngSignature = "\x89PNG\r\n\x1a\n";

Format format_of_content(std::string_view bytes) {
  if (bytes.substr(0, kPngSignature.size()) == kPngSignature) return Format::png;
  if (bytes.substr(0, 3) == "\xff\xd8\xff") return Format::jpeg;
  if (bytes.substr(0, 2) == "BM") return Format::bmp;
  if (bytes.size() > 2 && bytes[0] == 'P' && (bytes[1] == '5' || bytes[1] == '6') &&
      std::isspace(static_cast<unsigned char>(bytes[2])) != 0) {
    return Format::netpbm;
  }
  return Format::unknown;
}

const char* name_of(Format format) {
  switch (format) {
    case Format::png:
      return "PNG";
    case Format::jpeg:
      return "JPEG";
    case Format::bmp:
      return "BMP";
    case Format::netpbm:
      return "PPM";
    case Format::rgb565:
      return "raw RGB565";
    case Format::unknown:
      break;
  }
  return "image";
}

std::uint32_t byte_at(std::string_view bytes, std::size_t i) {
  return static_cast<unsigned char>(bytes[i]);
}
std::uint32_t big_endian(std::string_view bytes, std::size_t i, std::size_t count) {
  std::uint32_t value = 0;
  for (std::size_t k = 0; k < count; ++k) value = (value << 8) | byte_at(bytes, i + k);
  return value;
}
std::uint32_t little_endian(std::string_view bytes, std::size_t i, std::size_t count) {
  std::uint32_t value = 0;
  for (std::size_t k = count; k-- > 0;) value = (value << 8) | byte_at(bytes, i + k);
  return value;
}

struct HeaderSize {
  double width_px = 0.0;
  double height_px = 0.0;
  bool complete = true;  ///< the file goes on to its proper end
};

/// Size and completeness from the file's own structure, nothing decoded. Nothing where the header
/// itself is broken.
std::optional<HeaderSize> png_header(std::string_view bytes) {
  if (bytes.size() < 33 || bytes.substr(12, 4) != "IHDR") return std::nullopt;
  HeaderSize size{static_cast<double>(big_endian(bytes, 16, 4)),
                  static_cast<double>(big_endian(bytes, 20, 4)),
                  false};
  std::size_t at = kPngSignature.size();
  while (at + 12 <= bytes.size()) {
    const std::size_t length = big_endian(bytes, at, 4);
    const std::string_view kind = bytes.substr(at + 4, 4);
    if (length > bytes.size() - at - 12) return size;
    if (kind == "IEND") {
      size.complete = true;
      return size;
    }
    at += 12 + length;
  }
  return size;
}

std::optional<HeaderSize> jpeg_header(std::string_view bytes) {
  std::size_t at = 2;
  while (at + 4 <= bytes.size()) {
    if (byte_at(bytes, at) != 0xFF) return std::nullopt;
    const std::uint32_t marker = byte_at(bytes, at + 1);
    if (marker == 0xFF) {  // a fill byte
      ++at;
      continue;
    }
    if (marker == 0x01 || (marker >= 0xD0 && marker <= 0xD8)) {
      at += 2;
      continue;
    }
    const std::size_t length = big_endian(bytes, at + 2, 2);
    const bool frame_header =
        marker >= 0xC0 && marker <= 0xCF && marker != 0xC4 && marker != 0xC8 && marker != 0xCC;
    if (frame_header) {
      if (at + 9 > bytes.size()) return std::nullopt;
      HeaderSize size{static_cast<double>(big_endian(bytes, at + 7, 2)),
                      static_cast<double>(big_endian(bytes, at + 5, 2)),
                      false};
      // The end marker cannot occur in entropy-coded data; some cameras pad after it.
      size.complete = bytes.rfind("\xff\xd9") != std::string_view::npos &&
                      bytes.rfind("\xff\xd9") > at + length;
      return size;
    }
    if (marker == 0xD9 || marker == 0xDA || length < 2) return std::nullopt;
    at += 2 + length;
  }
  return std::nullopt;
}

std::optional<HeaderSize> bmp_header(std::string_view bytes) {
  if (bytes.size() < 26) return std::nullopt;
  const std::uint32_t pixels_at = little_endian(bytes, 10, 4);
  const std::uint32_t header = little_endian(bytes, 14, 4);
  if (header == 12) {
    return HeaderSize{static_cast<double>(little_endian(bytes, 18, 2)),
                      static_cast<double>(little_endian(bytes, 20, 2)),
                      bytes.size() >= pixels_at};
  }
  if (bytes.size() < 54) return std::nullopt;
  const double width = static_cast<double>(static_cast<std::int32_t>(little_endian(bytes, 18, 4)));
  const double signed_height =
      static_cast<double>(static_cast<std::int32_t>(little_endian(bytes, 22, 4)));
  const double height = signed_height < 0.0 ? -signed_height : signed_height;
  const std::uint32_t bits = little_endian(bytes, 28, 2);
  const bool packed = little_endian(bytes, 30, 4) == 1 || little_endian(bytes, 30, 4) == 2;
  const double row_bytes = 4.0 * std::floor((width * bits + 31.0) / 32.0);
  HeaderSize size{width, height, true};
  size.complete = packed ? bytes.size() >= little_endian(bytes, 2, 4)
                         : static_cast<double>(bytes.size()) >= pixels_at + row_bytes * height;
  return size;
}

std::optional<HeaderSize> netpbm_header(std::string_view bytes) {
  std::size_t at = 2;
  std::array<double, 3> numbers{};
  for (double& number : numbers) {
    while (at < bytes.size() &&
           (std::isspace(static_cast<unsigned char>(bytes[at])) != 0 || bytes[at] == '#')) {
      if (bytes[at] == '#') {
        while (at < bytes.size() && bytes[at] != '\n') ++at;
      } else {
        ++at;
      }
    }
    int digits = 0;
    while (at < bytes.size() && bytes[at] >= '0' && bytes[at] <= '9' && digits < 9) {
      number = number * 10.0 + (bytes[at] - '0');
      ++at;
      ++digits;
    }
    if (digits == 0 || digits == 9) return std::nullopt;
  }
  if (at >= bytes.size()) return HeaderSize{numbers[0], numbers[1], false};
  ++at;  // the one blank before the pixels
  const double channels = bytes[1] == '6' ? 3.0 : 1.0;
  const double sample_bytes = numbers[2] > 255.0 ? 2.0 : 1.0;
  const double needed = numbers[0] * numbers[1] * channels * sample_bytes;
  return HeaderSize{numbers[0], numbers[1], static_cast<double>(bytes.size() - at) >= needed};
}

std::optional<HeaderSize> header_of(Format format, std::string_view bytes) {
  switch (format) {
    case Format::png:
      return png_header(bytes);
    case Format::jpeg:
      return jpeg_header(bytes);
    case Format::bmp:
      return bmp_header(bytes);
    case Format::netpbm:
      return netpbm_header(bytes);
    default:
      return std::nullopt;
  }
}

cv::Mat decode_rgb565(std::string_view bytes,
                      const std::string& name,
                      FrameSize size,
                      ByteOrder order) {
  if (size.width_px <= 0 || size.height_px <= 0) {
    throw InputError(name, "a raw RGB565 dump needs the camera's size; give it in rig.yaml");
  }
  const auto width = static_cast<std::size_t>(size.width_px);
  const auto height = static_cast<std::size_t>(size.height_px);
  if (bytes.size() != width * height * 2) {
    throw InputError(
        name,
        fmt::format("has {} bytes; a raw RGB565 dump of {} x {} pixels has {}{}",
                    bytes.size(),
                    width,
                    height,
                    width * height * 2,
                    bytes.size() < width * height * 2 ? ": it is cut short"
                                                      : ": check the size in rig.yaml"));
  }
  cv::Mat bgr(size.height_px, size.width_px, CV_8UC3);
  const std::size_t high = order == ByteOrder::high_first ? 0 : 1;
  const auto* from = reinterpret_cast<const unsigned char*>(bytes.data());
  for (int row = 0; row < size.height_px; ++row) {
    auto* to = bgr.ptr<unsigned char>(row);
    for (std::size_t column = 0; column < width; ++column, from += 2, to += 3) {
      const unsigned pixel = (static_cast<unsigned>(from[high]) << 8) | from[1 - high];
      const unsigned r = pixel >> 11;
      const unsigned g = (pixel >> 5) & 63U;
      const unsigned b = pixel & 31U;
      // The top bits repeated below: 31 becomes 255, 0 stays 0, and the top bits are kept.
      to[0] = static_cast<unsigned char>((b << 3) | (b >> 2));
      to[1] = static_cast<unsigned char>((g << 2) | (g >> 4));
      to[2] = static_cast<unsigned char>((r << 3) | (r >> 2));
    }
  }
  return bgr;
}

int threads_for(std::size_t jobs) {
  const unsigned cores = std::max(1U, std::thread::hardware_concurrency());
  return static_cast<int>(std::min<std::size_t>(cores, std::max<std::size_t>(jobs, 1)));
}

}  // namespace

bool is_image_name(const std::filesystem::path& path) {
  return format_of_name(path) != Format::unknown;
}

cv::Mat decode_image(std::string_view bytes,
                     const std::string& name,
                     FrameSize size,
                     ByteOrder order) {
  if (bytes.empty()) throw InputError(name, "is empty; capture it again");
  const Format named = format_of_name(name);
  if (named == Format::rgb565) return decode_rgb565(bytes, name, size, order);
  const Format found = format_of_content(bytes);
  if (found == Format::unknown) {
    throw InputError(
        name,
        fmt::format("is no {} image, whatever its name says; save it as PNG, JPEG, BMP "
                    "or PPM",
                    name_of(named)));
  }
  if (found != named) {
    throw InputError(
        name, fmt::format("holds a {} image; its name's ending must say so", name_of(found)));
  }
  const auto header = header_of(found, bytes);
  if (!header || !(header->width_px >= 1.0) || !(header->height_px >= 1.0)) {
    throw InputError(name,
                     fmt::format("its {} header is damaged; capture it again", name_of(found)));
  }
  if (header->width_px * header->height_px > kMostPixels) {
    throw InputError(name,
                     fmt::format("is {:.0f} x {:.0f} pixels; more than 64 megapixels are refused",
                                 header->width_px,
                                 header->height_px));
  }
  if ((size.width_px > 0 && header->width_px != size.width_px) ||
      (size.height_px > 0 && header->height_px != size.height_px)) {
    throw InputError(name,
                     fmt::format("is {:.0f} x {:.0f} pixels; rig.yaml says {} x {}",
                                 header->width_px,
                                 header->height_px,
                                 size.width_px,
                                 size.height_px));
  }
  if (!header->complete) {
    throw InputError(name, "is cut short; copy or capture it again");
  }
  cv::Mat bgr;
  try {
    const cv::Mat raw(1,
                      static_cast<int>(bytes.size()),
                      CV_8UC1,
                      const_cast<char*>(bytes.data()));  // OpenCV reads it only
    bgr = cv::imdecode(raw, cv::IMREAD_COLOR | cv::IMREAD_IGNORE_ORIENTATION);
  } catch (const cv::Exception&) {
    bgr.release();
  }
  if (bgr.empty() || bgr.cols != static_cast<int>(header->width_px) ||
      bgr.rows != static_cast<int>(header->height_px)) {
    throw InputError(name, "is damaged and cannot be decoded; copy or capture it again");
  }
  return bgr;
}

cv::Mat load_image(const std::filesystem::path& path, FrameSize size, ByteOrder order) {
  return decode_image(read_file(path), path.string(), size, order);
}

cv::Mat load_image(const std::filesystem::path& path, const CameraSpec& camera) {
  return load_image(path, {camera.width_px, camera.height_px}, camera.rgb565_order);
}

LoadedFrames load_frames(std::span<const FrameToLoad> files,
                         const CameraSpec& camera,
                         Progress& progress) {
  struct Slot {
    cv::Mat bgr;
    std::vector<Problem> problems;
  };
  std::vector<Slot> slots(files.size());
  std::atomic<std::size_t> next{0};
  std::atomic<int> done{0};
  const auto work = [&] {
    for (std::size_t i = next++; i < files.size() && !progress.cancelled(); i = next++) {
      try {
        slots[i].bgr = load_image(files[i].path, camera);
      } catch (const InputError& error) {
        slots[i].problems = error.problems();
      }
      progress.at("images read:", ++done, static_cast<int>(files.size()));
    }
  };
  {
    std::vector<std::jthread> threads;
    for (int i = 1; i < threads_for(files.size()); ++i) threads.emplace_back(work);
    work();
  }
  LoadedFrames loaded;
  for (std::size_t i = 0; i < files.size(); ++i) {
    if (!slots[i].bgr.empty()) {
      loaded.frames.push_back({files[i].image, files[i].light, std::move(slots[i].bgr)});
    }
    for (Problem& problem : slots[i].problems) loaded.left_out.push_back(std::move(problem));
  }
  return loaded;
}

std::string encode_rgb565(const cv::Mat& bgr, ByteOrder order) {
  std::string bytes;
  bytes.reserve(static_cast<std::size_t>(bgr.total()) * 2);
  for (int row = 0; row < bgr.rows; ++row) {
    const auto* from = bgr.ptr<unsigned char>(row);
    for (int column = 0; column < bgr.cols; ++column, from += 3) {
      const unsigned pixel = (static_cast<unsigned>(from[2] >> 3) << 11) |
                             (static_cast<unsigned>(from[1] >> 2) << 5) |
                             static_cast<unsigned>(from[0] >> 3);
      const char high = static_cast<char>(static_cast<unsigned char>(pixel >> 8));
      const char low = static_cast<char>(static_cast<unsigned char>(pixel & 255U));
      bytes += order == ByteOrder::high_first ? high : low;
      bytes += order == ByteOrder::high_first ? low : high;
    }
  }
  return bytes;
}

std::string left_out_text(const LoadedFrames& loaded) {
  constexpr std::size_t kMostNamed = 5;
  const std::size_t out = loaded.left_out.size();
  if (out == 0) return "";
  std::string text = fmt::format("{} of {} images left out: ", out, out + loaded.frames.size());
  for (std::size_t i = 0; i < std::min(out, kMostNamed); ++i) {
    if (i > 0) text += "; ";
    text += fmt::format("{} ({})", loaded.left_out[i].where, loaded.left_out[i].what);
  }
  if (out > kMostNamed) text += fmt::format("; and {} more", out - kMostNamed);
  return text;
}

}  // namespace rondel::vision
