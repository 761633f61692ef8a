#pragma once

#include <cstdint>
#include <filesystem>
#include <optional>
#include <string>
#include <vector>

#include "calib/base/geometry.h"
#include "vision/scene/scene_rig.h"
#include "vision/scene/vec3.h"

namespace rondel::scene {

/// Reflectance (linear light, 0..1) that an sRGB colour code stands for (IEC 61966-2-1).
[[nodiscard]] Vec3 srgb(int red, int green, int blue);

struct Material {
  Vec3 albedo{0.5, 0.5, 0.5};  ///< linear reflectance
  double gloss = 0.0;          ///< strength of the lamps' highlights, 0 matt to 1 lacquer
};

// ---- what stands in the hall; all positions in the hall's own frame, m, z up from the floor -----

enum class Solid { ball, box, cylinder };

/// A thing on the floor. One with a name is an object somebody looks for; its truth is recorded.
struct SceneObject {
  std::string id;    ///< its own name among the scene's objects, "buoy_1"
  std::string name;  ///< what it is, "buoy"; empty: scenery
  Solid solid = Solid::ball;
  FloorPoint at;            ///< its centre
  double turn_rad = 0.0;    ///< box: direction of its length
  double diameter_m = 0.0;  ///< ball, cylinder
  double length_m = 0.0;    ///< box
  double width_m = 0.0;     ///< box
  double height_m = 0.0;    ///< box, cylinder
  Material material;
};

/// A painted line on the floor.
struct Lane {
  std::vector<FloorPoint> points;
  double width_m = 0.04;
  Vec3 albedo{0.8, 0.8, 0.8};
};

struct Floor {
  Material hall{{0.22, 0.17, 0.12}, 0.1};  ///< around the mat
  FloorPoint mat_low{-1.5, -1.0};          ///< the mat's corners; equal: no mat
  FloorPoint mat_high{1.5, 1.0};
  Material mat{{0.23, 0.235, 0.24}, 0.05};
  double texture = 0.08;   ///< relative contrast of the floor's grain
  double grain_m = 0.006;  ///< its finest period
  std::vector<Lane> lanes;
};

/// An upright board; lifted off the floor it is a poster, a door's window, a table's top.
struct Wall {
  FloorPoint from, to;
  double lift_m = 0.0;
  double height_m = 0.12;
  double thickness_m = 0.018;
  Material material{{0.55, 0.55, 0.53}, 0.1};
};

/// The hall around: four walls with a skirting, and a ceiling.
struct Hall {
  FloorPoint low{-4.0, -3.0};
  FloorPoint high{4.0, 3.0};
  double height_m = 2.9;
  Material walls{{0.62, 0.60, 0.56}, 0.0};
  Vec3 skirting{0.10, 0.09, 0.08};
  double skirting_m = 0.12;
  Material ceiling{{0.75, 0.75, 0.73}, 0.0};
};

/// A round luminaire facing down.
struct Lamp {
  Vec3 at{0.0, 0.0, 2.8};
  double radius_m = 0.25;
  double lux = 300.0;  ///< illuminance it alone gives on the floor straight below
  double kelvin = 4000.0;
};

/// An upright bright rectangle in a wall, facing the hall's middle.
struct Window {
  FloorPoint from, to;
  double sill_m = 0.9;
  double top_m = 2.2;
  double lux = 800.0;  ///< illuminance it alone gives on an upright surface one metre before it
  double kelvin = 6500.0;
};

/// A lighting condition, and how the camera was set in it.
struct Light {
  std::string name;
  std::vector<Lamp> lamps;
  std::vector<Window> windows;
  double ambient_lux = 60.0;  ///< from everywhere, after many bounces
  double ambient_kelvin = 4500.0;
  double exposure_lux = 900.0;   ///< illuminance under which perfect white just fills the sensor
  double stops = 0.0;            ///< exposure on top of that; positive is brighter
  double white_kelvin = 5000.0;  ///< what the camera takes for white
  double white_error_red = 1.0;  ///< gain errors of its white balance
  double white_error_blue = 1.0;
};

// ---- the robot; heights from the pinhole, positions in the chassis -----------------------------

struct Post {
  double bearing_rad = 0.0;
  double distance_m = 0.040;
  double radius_m = 0.003;
};

/// A block standing on the plate.
struct RobotPart {
  FloorPoint at;
  double turn_rad = 0.0;
  double length_m = 0.02;
  double width_m = 0.02;
  double height_m = 0.01;
  Material material;
};

struct Robot {
  double plate_radius_m = 0.085;
  double plate_below_eye_m = 0.045;
  double plate_thickness_m = 0.004;
  double body_radius_m = 0.070;  ///< below the plate, down to 8 mm above the floor
  std::vector<Post> posts{{1.0471975511965976, 0.040, 0.003},
                          {3.1415926535897931, 0.040, 0.003},
                          {-1.0471975511965976, 0.040, 0.003}};
  std::vector<RobotPart> parts;
  double holder_radius_m = 0.0345;  ///< the ring that holds the mirror; 0: none
  double camera_radius_m = 0.008;   ///< lens barrel
  double camera_board_m = 0.026;    ///< edge of the square board under it
  Material plate{{0.035, 0.036, 0.04}, 0.15};
  Material post{{0.02, 0.02, 0.02}, 0.3};
  Material holder{{0.03, 0.03, 0.03}, 0.2};
  Material board{{0.02, 0.11, 0.05}, 0.2};
};

// ---- the camera
// ----------------------------------------------------------------------------------

struct Sensor {
  int supersample = 3;          ///< rays a side and pixel
  double vignetting = 0.25;     ///< loss of light at the image's corner, 0..1
  double defocus_px = 0.55;     ///< standard deviation of the blur
  double glare = 0.02;          ///< share of the light that the lens scatters widely
  double full_well_e = 9000.0;  ///< electrons at full scale; 0: no noise at all
  double read_noise_e = 9.0;
  bool bayer = true;     ///< mosaic (RGGB) and demosaicing
  int jpeg_quality = 0;  ///< 1..100; 0: none
  bool rgb565 = false;
  double mirror_reflectance = 0.88;
};

/// Where the robot stands: the robot frame in the hall.
struct Pose {
  double x_m = 0.0;
  double y_m = 0.0;
  double heading_rad = 0.0;
};

/// An object of the scene standing elsewhere in one frame, or taken away.
struct Move {
  std::size_t object = 0;  ///< index into Scene::objects
  FloorPoint at;
  double turn_rad = 0.0;
  bool away = false;
};

struct SceneFrame {
  std::string image;  ///< "frames/noon/0001.png"; .jpg is written as JPEG of the sensor's quality
  std::size_t light = 0;  ///< index into Scene::lights
  Pose pose;
  std::vector<Move> moves;
};

/// What a person with a tape and a mouse would write down about the frames (survey.h).
struct Survey {
  std::uint64_t seed = 1;
  double mark_px = 0.5;   ///< standard deviation of a click, along u and v
  double tape_m = 0.003;  ///< standard deviation of a measured place, along x and y
  int floor_marks = 4;
  int object_marks = 4;
  double nearest_m = 0.25;  ///< of marks
  double farthest_m = 1.4;
};

/// Everything there is to render: made in code or read from a file.
struct Scene {
  std::string name = "scene";
  std::uint64_t seed = 1;  ///< of the noise and the floor's grain
  SceneRig rig;
  Robot robot;
  Sensor sensor;
  Floor floor;
  Hall hall;
  std::vector<Wall> walls;
  std::vector<SceneObject> objects;
  std::vector<Light> lights;
  std::vector<SceneFrame> frames;
  std::optional<Survey> survey;
};

/// A scene to render at once: `rig` in a hall with mat, lanes, boards around it, a few objects
/// ("buoy" balls of 74 mm, boxes "dock_teal" and "dock_violet", dark cylinders without a name) laid
/// out by `seed`, lights "noon" (window), "dusk" (warm, dim) and "lamps", and `frames_per_light`
/// frames a light between which the robot moves and turns. Frames are independent: a test that
/// wants one light or fewer frames erases the others. A frame of 320 x 240 px costs about 0.8 s of
/// one core with nine rays a pixel, 0.3 s with `sensor.supersample = 1`.
[[nodiscard]] Scene practice_scene(const SceneRig& rig, unsigned seed, int frames_per_light);

/// Reads a scene file. Strict: every unknown key, wrong type and value out of range is reported
/// with its line, all at once (InputError).
[[nodiscard]] Scene read_scene(const std::filesystem::path& path);
/// The same from the file's text; `file` names it in problems.
[[nodiscard]] Scene parse_scene(const std::string& text, const std::string& file);

}  // namespace rondel::scene
