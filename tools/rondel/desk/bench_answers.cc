#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <limits>
#include <set>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "calib/colour/choose.h"
#include "calib/link/link_plan.h"
#include "calib/range/advice.h"
#include "calib/venue/read_sheets.h"
#include "calib/venue/read_yaml.h"
#include "tools/rondel/commands/command.h"
#include "tools/rondel/desk/bench.h"
#include "tools/rondel/desk/request.h"
#include "tools/rondel/range_input.h"
#include "tools/rondel/results.h"
#include "tools/rondel/steps/tables_step.h"
#include "vision/detect/detect.h"
#include "vision/frames/load.h"

namespace rondel::app {
namespace {

using nlohmann::json;
using nlohmann::ordered_json;

double height_of(const VenueSpec& venue, const std::string& object) {
  if (object.empty()) return 0.0;
  const ObjectSpec* found = venue.find_object(object);
  if (found == nullptr) {
    throw Refusal(404, fmt::format("'{}' is no object of venue.yaml", object));
  }
  return found->seen_height_m();
}

bool visible(const cv::Mat& mask, ImagePoint at) {
  if (mask.empty()) return true;
  const auto u = static_cast<int>(std::lround(at.u_px));
  const auto v = static_cast<int>(std::lround(at.v_px));
  return u >= 0 && v >= 0 && u < mask.cols && v < mask.rows && mask.at<std::uint8_t>(v, u) != 0;
}

ordered_json estimate_json(const range::FloorEstimate& e) {
  return {{"range_m", e.spot.range_m},
          {"range_sd_m", e.range_sd_m},
          {"band95_m", {e.band95_low_m, e.band95_high_m}},
          {"bearing_deg", e.spot.bearing_rad * kDegPerRad},
          {"bearing_sd_deg", e.bearing_sd_rad * kDegPerRad}};
}

/// Boxes as the page has them.
colour::ThresholdSet set_of(const json& request) {
  colour::ThresholdSet set;
  set.object = text_of(request, "object");
  const auto boxes = request.find("boxes");
  if (boxes == request.end() || !boxes->is_array() || boxes->size() > 8) {
    throw Refusal(400, "boxes: must be a list of at most 8");
  }
  const auto pair = [](const json& box, const char* key, int most) {
    const auto ends = box.find(key);
    if (ends == box.end() || !ends->is_array() || ends->size() != 2 ||
        !(*ends)[0].is_number_integer() || !(*ends)[1].is_number_integer()) {
      throw Refusal(400, fmt::format("boxes: {} must be two whole numbers", key));
    }
    const std::array<int, 2> read = {(*ends)[0].get<int>(), (*ends)[1].get<int>()};
    if (read[0] < 0 || read[1] < 0 || read[0] > most || read[1] > most) {
      throw Refusal(400, fmt::format("boxes: {} must be from 0 to {}", key, most));
    }
    return read;
  };
  for (const json& one : *boxes) {
    colour::HsvBox box;
    const std::array<int, 2> h = pair(one, "h", 179);
    box.h = {h[0], h[1]};
    box.s = pair(one, "s", 255);
    box.v = pair(one, "v", 255);
    set.boxes.push_back(box);
  }
  return set;
}

/// Counts over two of a pixel's three numbers, `columns` x `rows` cells, as shares of the fullest
/// one (on a root scale, so that thin tails can be seen).
class Grid {
 public:
  Grid(int columns, int rows)
      : columns_(columns), cells_(static_cast<std::size_t>(columns * rows)) {}
  void add(int column, int row, double count) {
    cells_[static_cast<std::size_t>(row * columns_ + column)] += count;
  }
  [[nodiscard]] ordered_json rows() const {
    const double most = *std::max_element(cells_.begin(), cells_.end());
    ordered_json out = ordered_json::array();
    for (std::size_t at = 0; at < cells_.size(); at += static_cast<std::size_t>(columns_)) {
      ordered_json row = ordered_json::array();
      for (int i = 0; i < columns_; ++i) {
        const double share =
            most > 0.0 ? std::sqrt(cells_[at + static_cast<std::size_t>(i)] / most) : 0.0;
        row.push_back(std::round(share * 100.0) / 100.0);
      }
      out.push_back(std::move(row));
    }
    return out;
  }

 private:
  int columns_;
  std::vector<double> cells_;
};

struct Planes {
  Grid hs{60, 32};
  Grid sv{32, 32};
  void add(const colour::RgbCounts& counts) {
    for (const auto& entry : counts.entries) {
      const colour::Hsv p = colour::to_hsv(entry.colour);
      hs.add(p.h / 3, p.s / 8, entry.count);
      sv.add(p.s / 8, p.v / 8, entry.count);
    }
  }
};

}  // namespace

std::shared_ptr<const vision::Labelled> Bench::labelled() {
  const std::string now = hashes({"venue.yaml", "rig.yaml", "swatches.csv", "results/mask.png"});
  return labelled_.get(now, [this] {
    const Workspace w = open();
    std::set<std::string> named;
    for (const Swatch& swatch : w.swatches) named.insert(swatch.image);
    std::vector<vision::FrameToLoad> files;
    for (const FrameFile& file : w.frames) {
      if (named.contains(file.image)) files.push_back({file.image, file.light, file.path});
    }
    Progress silent;
    const vision::LoadedFrames loaded = vision::load_frames(files, w.rig.camera, silent);
    cv::Mat mask = geometry()->mask;
    if (mask.empty()) {
      mask = cv::Mat(w.rig.camera.height_px, w.rig.camera.width_px, CV_8U, cv::Scalar(255));
    }
    return vision::collect(loaded.frames, w.swatches, w.venue.objects, mask, silent);
  });
}

ordered_json Bench::place_of_pixel(ImagePoint at, const std::string& object) {
  const auto w = workspace();
  const auto shape = geometry();
  ordered_json answer = {{"u_px", at.u_px}, {"v_px", at.v_px}};
  if (!shape->curve) return answer;
  const auto e = shape->curve->curve->floor_with_band(at, height_of(w->venue, object));
  if (!e) return answer;
  answer.update(estimate_json(*e));
  answer["visible"] = visible(shape->mask, at);
  return answer;
}

ordered_json Bench::pixel_of_place(FloorSpot spot, const std::string& object) {
  const auto w = workspace();
  const auto shape = geometry();
  ordered_json answer = {{"range_m", spot.range_m}, {"bearing_deg", spot.bearing_rad * kDegPerRad}};
  if (!shape->curve) return answer;
  const double height = height_of(w->venue, object);
  const auto at = shape->curve->curve->pixel_of(spot, height);
  if (!at) {
    answer["visible"] = false;
    return answer;
  }
  if (const auto e = shape->curve->curve->floor_with_band(*at, height)) {
    answer.update(estimate_json(*e));
  }
  answer["u_px"] = at->u_px;
  answer["v_px"] = at->v_px;
  answer["visible"] = visible(shape->mask, *at);
  return answer;
}

ordered_json Bench::snap(const std::string& image, ImagePoint at, const std::string& object) {
  const auto w = workspace();
  static_cast<void>(height_of(w->venue, object));  // refuses unknown names
  const FrameFile& file = frame_file(*w, image);
  vision::DetectorSetup setup;
  const std::vector<colour::ThresholdSet> all = sets(*w);
  if (all.empty()) return ordered_json::object();
  setup.table = colour::make_class_table(all);
  setup.objects = w->venue.objects;
  const auto shape = geometry();
  const CameraSpec& camera = w->rig.camera;
  setup.mask = shape->mask.empty()
                   ? cv::Mat(camera.height_px, camera.width_px, CV_8U, cv::Scalar(255))
                   : shape->mask;
  setup.centre = shape->curve
                     ? shape->curve->curve->centre()
                     : ImagePoint{0.5 * (camera.width_px - 1), 0.5 * (camera.height_px - 1)};
  const cv::Mat bgr = vision::load_image(file.path, camera);
  const vision::Blob* nearest = nullptr;
  double best_px = std::numeric_limits<double>::infinity();
  const std::vector<vision::Blob> blobs = vision::detect(setup, bgr);
  for (const vision::Blob& blob : blobs) {
    if (w->venue.objects[static_cast<std::size_t>(blob.object)].name != object) continue;
    const double away_px = std::hypot(blob.centroid.u_px - at.u_px, blob.centroid.v_px - at.v_px);
    // Within the blob, or a finger's width beside it.
    if (away_px > 6.0 + 0.75 * std::max(blob.box.width, blob.box.height)) continue;
    if (away_px >= best_px) continue;
    best_px = away_px;
    nearest = &blob;
  }
  if (nearest == nullptr) return ordered_json::object();
  return {{"u_px", nearest->measured.u_px},
          {"v_px", nearest->measured.v_px},
          {"area_px", nearest->area_px},
          {"cut_by_mask", nearest->cut_by_mask}};
}

ordered_json Bench::advice() {
  const auto w = workspace();
  const auto shape = geometry();
  if (!shape->curve) {
    throw Refusal(
        409,
        "there is no range curve yet to say where it is weakest: add a mark, or a mirror's "
        "drawing in rig.yaml");
  }
  range::AdviceInput input;
  input.near_m = w->venue.link.near_m;
  input.far_m = w->venue.link.far_m;
  input.mark_px = w->venue.noise.mark_px;
  input.tape_m = w->venue.noise.tape_m;
  input.tolerance = w->venue.tolerance;
  input.visible = [&](ImagePoint at) { return visible(shape->mask, at); };
  input.count = 3;
  const range::Advice advice = range::advise(*shape->curve->curve, input);
  ordered_json spots = ordered_json::array();
  for (const range::AdvisedMark& mark : advice.marks) {
    spots.push_back({{"range_m", mark.spot.range_m},
                     {"bearing_deg", mark.spot.bearing_rad * kDegPerRad},
                     {"u_px", mark.pixel.u_px},
                     {"v_px", mark.pixel.v_px},
                     {"text",
                      fmt::format("The widest band falls from ±{:.1f} % to ±{:.1f} %.",
                                  196.0 * mark.spread_before,
                                  196.0 * mark.spread_after)}});
  }
  return {{"spots", spots}, {"enough", advice.enough}, {"why", advice.why}};
}

ordered_json Bench::comparison(const std::string& other) {
  Arguments arguments;
  arguments.words = {other, folder_.string()};
  Progress silent;
  const Outcome outcome = compare_command(arguments, silent);
  ordered_json answer = outcome.document;
  answer["summary"] = outcome.summary;
  return answer;
}

ordered_json Bench::try_marks(const json& request) {
  const auto w = workspace();
  const auto list = request.find("marks");
  if (list == request.end() || !list->is_array() || list->size() > 5000) {
    throw Refusal(400, "marks: must be a list");
  }
  std::vector<Mark> marks;
  for (const json& one : *list) {
    if (!one.is_object()) throw Refusal(400, "marks: must be a list of marks");
    Mark mark;
    mark.line = static_cast<int>(number_of(one, "line", 0, 1e9));
    mark.pixel = {number_of(one, "u_px", -0.5, w->rig.camera.width_px),
                  number_of(one, "v_px", -0.5, w->rig.camera.height_px)};
    mark.object = one.value("object", "");
    mark.range_m = number_of(one, "range_m", 1e-3, 100.0);
    if (one.contains("bearing_deg") && !one["bearing_deg"].is_null()) {
      mark.bearing_rad = wrap_angle(number_of(one, "bearing_deg", -360.0, 360.0) * kRadPerDeg);
    }
    marks.push_back(std::move(mark));
  }
  range::FitInput input = range_input(*w, marks);
  const auto shape = geometry();
  if (shape->curve) input.only_model = shape->curve->model;
  const Curve curve = shown(range::fit_range(input), marks);
  ordered_json answer = curve_json(curve, marks, w->venue);
  answer["marks"] = places_json(curve, marks, w->venue);
  answer["flagged"] = curve.flagged;
  return answer;
}

ordered_json Bench::try_boxes(const json& request) {
  const auto w = workspace();
  const colour::ThresholdSet set = set_of(request);
  const auto object = std::find_if(w->venue.objects.begin(),
                                   w->venue.objects.end(),
                                   [&](const ObjectSpec& o) { return o.name == set.object; });
  if (object == w->venue.objects.end()) {
    throw Refusal(404, fmt::format("'{}' is no object of venue.yaml", set.object));
  }
  const auto index = static_cast<std::size_t>(object - w->venue.objects.begin());
  const auto samples = labelled();
  const colour::ColourShift as_captured(colour::LightChange{}, true);
  ordered_json lights = ordered_json::array();
  for (const colour::LightSamples& light : samples->lights) {
    lights.push_back(
        {{"light", light.light},
         {"recall", colour::share_in(light.objects[index], set, as_captured)},
         {"false_positive_rate", colour::share_in(light.surroundings, set, as_captured)}});
  }
  return {{"object", set.object}, {"lights", lights}};
}

ordered_json Bench::densities(const std::string& object) {
  const auto w = workspace();
  static_cast<void>(height_of(w->venue, object));
  const auto samples = labelled();
  Planes mine;
  Planes around;
  for (const colour::LightSamples& light : samples->lights) {
    around.add(light.surroundings);
    for (std::size_t o = 0; o < light.objects.size(); ++o) {
      if (w->venue.objects[o].name == object) mine.add(light.objects[o]);
    }
  }
  return {{"hs", {{"object", mine.hs.rows()}, {"surroundings", around.hs.rows()}}},
          {"sv", {{"object", mine.sv.rows()}, {"surroundings", around.sv.rows()}}}};
}

ordered_json Bench::try_link(const json& request) {
  Workspace w = *workspace();
  LinkSpec& link = w.venue.link;
  link.near_m = number_of(request, "near_m", 0.01, 50.0);
  link.far_m = number_of(request, "far_m", 0.02, 100.0);
  link.range_bits = static_cast<int>(number_of(request, "range_bits", 2, 14));
  link.baud = static_cast<int>(number_of(request, "baud", 300, 4e6));
  w.venue.budget.table_bytes = static_cast<int>(number_of(request, "table_bytes", 1, 1e6));
  if (!(link.far_m > link.near_m)) throw Refusal(422, "far_m must be above near_m");
  const link::LinkPlan plan = link::plan_link(
      link, static_cast<int>(w.venue.objects.size()), (folder_ / "venue.yaml").string());
  ordered_json answer = {{"link",
                          {{"bytes_per_report", plan.report.bytes},
                           {"utilisation", plan.utilisation},
                           {"latency_ms", 1e3 * plan.report_s},
                           {"worst_age_ms", 1e3 * plan.worst_age_s},
                           {"warnings", plan.warnings}}}};
  if (state_of(w, "range").freshness == Freshness::missing) return answer;
  Progress silent;
  const link::BuiltTables built = make_tables(w, read_tables_inputs(w), silent);
  answer["bytes"] = {{"camera_tables", link::table_bytes(built.tables)},
                     {"drive_tables", 2 * built.tables.range_codes()},
                     {"class_table", link::class_bytes(built.tables)},
                     {"mask", 4 * built.tables.mask.size()}};
  answer["codebook"] = {{"codes", built.book.size()},
                        {"near_m", link.near_m},
                        {"far_m", link.far_m},
                        {"worst_relative_error", built.book.worst_relative_error()}};
  return answer;
}

std::vector<std::string> Bench::problems_with(const std::string& file,
                                              const std::string& text) const {
  std::vector<Problem> problems;
  if (file == "venue.yaml") {
    static_cast<void>(read_venue(text, file, problems));
  } else if (file == "rig.yaml") {
    static_cast<void>(read_rig(text, file, folder_, problems));
  } else if (!text.empty()) {
    std::vector<Problem> others;  // of the YAML files: told where they are
    const VenueSpec venue = read_venue(read_file(folder_ / "venue.yaml"), "venue.yaml", others);
    const RigSpec rig = read_rig(read_file(folder_ / "rig.yaml"), "rig.yaml", folder_, others);
    std::set<std::string> images;
    for (const FrameFile& frame : list_frames(folder_, others)) images.insert(frame.image);
    const SheetContext context{
        venue, rig.camera, [&](const std::string& image) -> std::optional<std::string> {
          if (images.contains(image)) return std::nullopt;
          return "there is no such image; name it from the folder on, as in frames/noon/0001.png";
        }};
    if (file == "marks.csv") static_cast<void>(read_marks(text, file, context, problems));
    if (file == "swatches.csv") static_cast<void>(read_swatches(text, file, context, problems));
    if (file == "strokes.csv") static_cast<void>(read_strokes(text, file, context, problems));
    if (file == "tape.csv") static_cast<void>(read_tape(text, file, context, problems));
  }
  std::vector<std::string> lines;
  for (const Problem& problem : problems) lines.push_back(to_text(problem));
  return lines;
}

ordered_json Bench::examine(const json& request) {
  const std::string file = text_of(request, "file");
  if (std::find(venue_files().begin(), venue_files().end(), file) == venue_files().end()) {
    throw Refusal(400, "file: is none of the venue's");
  }
  return {{"problems", problems_with(file, text_of(request, "text"))}};
}

}  // namespace rondel::app
