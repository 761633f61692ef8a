#pragma once

#include <array>
#include <map>
#include <optional>
#include <string>
#include <utility>
#include <variant>
#include <vector>

#include "calib/base/geometry.h"

namespace rondel {

/// A value with one standard deviation of tolerance. sd 0 means exact.
struct Uncertain {
  double value = 0.0;
  double sd = 0.0;
};

// ---- rig.yaml --------------------------------------------------------------------------------

/// Which byte of a pixel comes first in a raw RGB565 dump.
enum class ByteOrder { high_first, low_first };

struct CameraSpec {
  int width_px = 0;
  int height_px = 0;
  std::optional<Uncertain> focal_px;
  ByteOrder rgb565_order = ByteOrder::high_first;  ///< `rgb565_order`, of *.565 and *.rgb565 files
};

/// sag(s) = c s^2 / (1 + sqrt(1 - (1+K) c^2 s^2)), c = 1 / vertex_radius_m, K = conic_constant.
struct ConicSpec {
  Uncertain vertex_radius_m;
  Uncertain conic_constant;
  double correlation = 0.0;  ///< of the two, where another form of the drawing leaves one
};

/// sag(s) = s tan(slope_rad).
struct ConeSpec {
  Uncertain slope_rad;
};

/// Measured points (distance from the axis, sag), both m, with the standard deviation of a sag.
struct ProfileSpec {
  std::vector<std::pair<double, double>> points_m;
  double sag_sd_m = 0.0;  ///< 0: taken from the points' own scatter
};

struct MirrorSpec {
  std::variant<ConicSpec, ConeSpec, ProfileSpec> shape;
  double rim_radius_m = 0.0;
  Uncertain distance_m;  ///< pinhole to mirror vertex
};

struct MountingSpec {
  std::optional<Uncertain> eye_height_m;  ///< pinhole above the floor
  std::optional<bool> mirrored;           ///< bearing grows with atan2(v - v0, u - u0)
  std::optional<double> heading_rad;      ///< bearing that u's direction has
  double robot_radius_m = 0.0;            ///< for drawings only; 0 when not given
};

/// rig.yaml: what the drawing says. Without `mirror` nothing is known but what the marks say.
struct RigSpec {
  CameraSpec camera;
  std::optional<MirrorSpec> mirror;
  MountingSpec mounting;
};

// ---- venue.yaml ------------------------------------------------------------------------------

enum class Shape { ball, box, post };

struct ObjectSpec {
  std::string name;
  Shape shape = Shape::ball;
  double diameter_m = 0.0;  ///< ball: diameter; box, post: width seen from the side, 0 unknown
  std::optional<double> height_m;  ///< `height_mm`, overrides the height it is seen at
  /// Height above the floor of the point that is measured: a ball's radius, else 0, or `height_m`.
  [[nodiscard]] double seen_height_m() const {
    if (height_m) return *height_m;
    return shape == Shape::ball ? 0.5 * diameter_m : 0.0;
  }
};

enum class CodebookMeasure { relative, absolute, rms, noise_matched };
enum class CheckByte { none, sum7, crc8 };

struct LinkSpec {
  int baud = 115200;
  double reports_per_second = 30.0;
  int bearing_codes = 120;
  int range_bits = 7;
  double near_m = 0.15;
  double far_m = 3.0;
  CheckByte check = CheckByte::sum7;  ///< `check_byte: true` is the 7-bit sum, `crc8` the CRC
  CodebookMeasure measure = CodebookMeasure::relative;
};

struct BudgetSpec {
  int table_bytes = 1024;    ///< range, bearing and tilt tables of all objects together
  int colour_bytes = 32768;  ///< class table
};

struct ToleranceSpec {
  double range_relative = 0.05;
  double range_floor_m = 0.020;  ///< below this an error in range never counts
  double bearing_rad = 3.0 * kRadPerDeg;
  double recall = 0.95;
  /// Allowed range error at `range_m`.
  [[nodiscard]] double range_m_at(double range_m) const {
    const double relative = range_relative * range_m;
    return relative > range_floor_m ? relative : range_floor_m;
  }
};

struct NoiseSpec {
  double mark_px = 0.5;
  double tape_m = 0.003;
};

/// `centre:` in venue.yaml replaces the centre step.
struct CentreOverride {
  ImagePoint centre;
  double sd_px = 0.0;
};

/// What the hall does to the light, for the colour step's perturbed lights.
struct LightingSpec {
  std::array<double, 2> stops = {-1.0, 1.0};
  bool auto_white_balance = false;
  std::array<double, 2> kelvin = {5000.0, 7000.0};  ///< counted only without white balance
};

enum class HsvScale { opencv, full_byte, degrees_percent };

/// venue.yaml.
struct VenueSpec {
  std::string name;
  std::vector<ObjectSpec> objects;  ///< in the file's order; the board's object index follows it
  /// `lights`, by hand and for people: a light's name and what it is. Frames decide which exist.
  std::vector<std::pair<std::string, std::string>> lights;
  LinkSpec link;
  BudgetSpec budget;
  ToleranceSpec tolerance;
  NoiseSpec noise;
  LightingSpec lighting;
  HsvScale hsv_scale = HsvScale::opencv;
  std::string prefix = "rondel";  ///< of every name in emitted code
  double false_positive_cap = 1e-4;
  std::optional<CentreOverride> centre;

  [[nodiscard]] const ObjectSpec* find_object(const std::string& object) const {
    for (const ObjectSpec& o : objects) {
      if (o.name == object) return &o;
    }
    return nullptr;
  }
};

// ---- the CSV files ---------------------------------------------------------------------------

/// A row of marks.csv. `line` is its line in the file, for messages.
struct Mark {
  int line = 0;
  std::string image;  ///< empty: from no frame
  ImagePoint pixel;
  std::string object;  ///< empty: a floor mark
  double range_m = 0.0;
  std::optional<double> bearing_rad;
};

struct Disc {
  ImagePoint centre;
  double radius_px = 0.0;
};
struct Box {
  ImagePoint low, high;
};
struct Polygon {
  std::vector<ImagePoint> corners;
};
struct Grow {
  ImagePoint seed;
};
using Region = std::variant<Disc, Box, Polygon, Grow>;

inline constexpr const char* kSurroundings = "surroundings";

/// A row of swatches.csv.
struct Swatch {
  int line = 0;
  std::string image;
  std::string label;  ///< an object's name, or kSurroundings
  Region region;
};

/// A row of strokes.csv: image-independent; later strokes win.
struct Stroke {
  int line = 0;
  bool hide = true;  ///< kind 'hide' or 'show'
  double width_px = 1.0;
  std::vector<ImagePoint> points;
};

/// A row of tape.csv.
struct TapeRow {
  int line = 0;
  std::string image;
  std::string object;
  double range_m = 0.0;  ///< ignored when absent
  std::optional<double> bearing_rad;
  bool absent = false;  ///< range_m empty: the object is not in the image
};

}  // namespace rondel
