#include "tools/rondel/desk/bench.h"

#include <fmt/format.h>
#include <yaml-cpp/yaml.h>

#include <algorithm>
#include <cmath>
#include <numbers>
#include <system_error>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "calib/colour/sets_file.h"
#include "calib/range/curve_file.h"
#include "calib/venue/centre_file.h"
#include "calib/venue/csv.h"
#include "tools/rondel/hash_store.h"
#include "tools/rondel/range_input.h"
#include "tools/rondel/results.h"
#include "vision/frames/load.h"
#include "vision/mask/find_mask.h"
#include "vision/mask/mask_file.h"

namespace rondel::app {
namespace {

namespace fs = std::filesystem;
using nlohmann::ordered_json;

constexpr std::uintmax_t kMostSheetBytes = 400000;  ///< a longer sheet is not shown as text
constexpr std::size_t kMostRowsShown = 2000;
constexpr int kBlindBearings = 72;

bool is_file(const fs::path& path) {
  std::error_code error;
  return fs::is_regular_file(path, error);
}

std::string content_of(const fs::path& path) {
  return is_file(path) ? read_file(path) : std::string();
}

/// The floor between the robot and where its own body lets the floor be seen, per bearing.
ordered_json blind_zone_of(const range::RangeCurve& curve, const cv::Mat& mask, double far_m) {
  ordered_json zones = ordered_json::array();
  const auto visible = [&](FloorSpot spot) {
    const auto at = curve.pixel_of(spot, 0.0);
    if (!at) return false;
    const auto u = static_cast<int>(std::lround(at->u_px));
    const auto v = static_cast<int>(std::lround(at->v_px));
    return u >= 0 && v >= 0 && u < mask.cols && v < mask.rows && mask.at<std::uint8_t>(v, u) != 0;
  };
  for (int i = 0; i < kBlindBearings; ++i) {
    const double bearing = wrap_angle(2.0 * std::numbers::pi * i / kBlindBearings);
    // Hidden stretches from the robot outwards; a carrier or cable may hide more behind a gap.
    double from = 0.0;
    bool hidden = true;
    double r = 0.02;
    for (; r < far_m; r *= 1.02) {
      const bool seen = visible({r, bearing});
      if (hidden && seen) {
        zones.push_back({{"bearing_deg", bearing * kDegPerRad},
                         {"width_deg", 360.0 / kBlindBearings},
                         {"from_m", from},
                         {"to_m", r}});
      } else if (!hidden && !seen) {
        from = r;
      }
      hidden = !seen;
    }
    // Beyond the rim nothing is hidden by the robot: an open end is no zone.
  }
  return zones;
}

ordered_json number(double value) {
  return std::isfinite(value) ? ordered_json(value) : ordered_json();
}

}  // namespace

const std::vector<std::string>& venue_files() {
  static const std::vector<std::string> kFiles = {
      "venue.yaml", "rig.yaml", "marks.csv", "swatches.csv", "strokes.csv", "tape.csv"};
  return kFiles;
}

std::vector<std::string> lines_of(const InputError& error) {
  std::vector<std::string> lines;
  for (const Problem& problem : error.problems()) lines.push_back(to_text(problem));
  return lines;
}

Bench::Bench(fs::path folder, desk::Events& events)
    : folder_(fs::weakly_canonical(folder)),
      events_(events),
      hashes_(std::make_shared<HashStore>()),
      journal_(folder_) {}

std::string Bench::hashes(std::initializer_list<const char*> files) const {
  std::string all;
  for (const char* file : files) all += hashes_->hash_of(folder_ / file) + ' ';
  return all;
}

std::string Bench::stamp() const {
  std::string all = hashes({"venue.yaml",
                            "rig.yaml",
                            "marks.csv",
                            "swatches.csv",
                            "strokes.csv",
                            "tape.csv",
                            "results/centre.yaml",
                            "results/mask.yaml",
                            "results/mask.png",
                            "results/range.yaml",
                            "results/colours.yaml",
                            "results/tables/manifest.yaml",
                            "results/check.json"});
  std::vector<Problem> problems;
  for (const FrameFile& file : list_frames(folder_, problems)) all += file.image + '\n';
  return sha256_hex(all);
}

Workspace Bench::open() const {
  Workspace workspace = open_workspace(folder_);
  workspace.hashes = hashes_;
  return workspace;
}

std::shared_ptr<const Workspace> Bench::workspace() {
  return workspace_.get(stamp(), [this] { return open(); });
}

Bench::Curve Bench::shown(const range::FitResult& fit, const std::vector<Mark>& marks) {
  Curve curve;
  curve.curve = fit.curve;
  curve.model = fit.model;
  curve.rms_px = fit.rms_px;
  curve.leave_one_out_relative = fit.leave_one_out_relative;
  curve.reach_m = fit.reach_m;
  for (const range::Flagged& f : fit.flagged) {
    const Mark& mark = marks.at(static_cast<std::size_t>(f.mark));
    curve.flagged.push_back(mark.line);
    curve.reasons.push_back(fmt::format(
        "marks.csv:{}: does not fit the others, the tape is {:+.3f} m off{}{}",
        mark.line,
        f.range_error_m,
        mark.bearing_rad ? fmt::format(" and {:+.1f}°", f.bearing_error_rad * kDegPerRad) : "",
        f.guess.empty() ? "; measure it again" : ": " + f.guess));
  }
  return curve;
}

Bench::Curve Bench::curve_on_file(const Workspace& workspace) const {
  const fs::path file = result_of(workspace, "range");
  Curve curve;
  curve.curve = range::read_range_curve(file);
  const YAML::Node root = YAML::LoadFile(file.string());
  curve.model = root["model"].as<std::string>();
  curve.rms_px = root["rms_px"].as<double>();
  curve.leave_one_out_relative = root["leave_one_out_relative"].as<double>();
  curve.reach_m = root["reach_m"].as<double>();
  for (const auto& f : root["flagged"]) {
    const auto index = f["mark"].as<std::size_t>();
    if (index >= workspace.marks.size()) continue;
    const Mark& mark = workspace.marks[index];
    const auto guess = f["guess"].as<std::string>();
    curve.flagged.push_back(mark.line);
    curve.reasons.push_back(
        fmt::format("marks.csv:{}: does not fit the others, the tape is {:+.3f} m off{}",
                    mark.line,
                    f["range_error_m"].as<double>(),
                    guess.empty() ? "; measure it again" : ": " + guess));
  }
  return curve;
}

std::shared_ptr<const Bench::Geometry> Bench::geometry() {
  const std::string now = hashes({"venue.yaml",
                                  "rig.yaml",
                                  "marks.csv",
                                  "strokes.csv",
                                  "results/centre.yaml",
                                  "results/range.yaml",
                                  "results/mask.png"});
  return geometry_.get(now, [this] {
    const Workspace workspace = open();
    Geometry made;
    const fs::path file = result_of(workspace, "range");
    const Freshness state = state_of(workspace, "range").freshness;
    if (state == Freshness::fresh) {
      made.curve = curve_on_file(workspace);
    } else if (!workspace.marks.empty() || workspace.rig.mirror) {
      // The marks have moved since: the curve through them as they are now, of the same model.
      try {
        range::FitInput input = range_input(workspace, workspace.marks);
        if (state == Freshness::stale) {
          input.only_model = YAML::LoadFile(file.string())["model"].as<std::string>("");
          if (range::find_model(input.only_model) == nullptr) input.only_model.clear();
        } else if (workspace.rig.mirror) {
          input.only_model = "drawing+tilt";
        }
        made.curve = shown(range::fit_range(input), workspace.marks);
      } catch (const InputError&) {
        if (state == Freshness::stale) made.curve = curve_on_file(workspace);
      }
    }
    const fs::path mask = workspace.results() / "mask.png";
    if (is_file(mask)) {
      made.mask = vision::read_mask(mask, workspace.rig.camera);
      vision::draw_strokes(workspace.strokes, made.mask);
    }
    made.blind_zone = ordered_json::array();
    if (made.curve && !made.mask.empty()) {
      made.blind_zone = blind_zone_of(*made.curve->curve, made.mask, workspace.venue.link.far_m);
    }
    return made;
  });
}

std::vector<colour::ThresholdSet> Bench::sets(const Workspace& workspace) const {
  std::vector<colour::ThresholdSet> sets;
  const fs::path file = result_of(workspace, "colours");
  if (!is_file(file)) return sets;
  const std::vector<colour::ThresholdSet> read = colour::read_threshold_sets(file);
  for (const ObjectSpec& object : workspace.venue.objects) {
    const auto set = std::find_if(
        read.begin(), read.end(), [&](const auto& s) { return s.object == object.name; });
    sets.push_back(set != read.end() ? *set : colour::ThresholdSet{object.name, {}});
  }
  return sets;
}

const FrameFile& Bench::frame_file(const Workspace& workspace, const std::string& image) const {
  const auto file = std::find_if(workspace.frames.begin(),
                                 workspace.frames.end(),
                                 [&](const FrameFile& f) { return f.image == image; });
  if (file == workspace.frames.end()) throw Refusal(404, "there is no such frame in this venue");
  // A link may point anywhere; only what is really inside the venue is shown.
  const fs::path real = fs::weakly_canonical(file->path);
  const fs::path relative = real.lexically_relative(folder_);
  if (relative.empty() || *relative.begin() == "..") {
    throw Refusal(403, image + ": lies outside the venue");
  }
  return *file;
}

nlohmann::ordered_json Bench::curve_json(const Curve& shown,
                                         const std::vector<Mark>& marks,
                                         const VenueSpec& venue) {
  const range::RangeCurve& curve = *shown.curve;
  const auto radius = [&](ImagePoint at) {
    return std::hypot(at.u_px - curve.centre().u_px, at.v_px - curve.centre().v_px);
  };
  // Over bearings the mean: a tilted mirror's curve is a bundle of lines, shown as one.
  ordered_json samples = ordered_json::array();
  constexpr int kSteps = 40;
  constexpr int kBearings = 8;
  const double near = venue.link.near_m;
  for (int i = 0; i <= kSteps; ++i) {
    const double range = near * std::pow(venue.link.far_m / near, static_cast<double>(i) / kSteps);
    double radius_px = 0.0;
    double low = 0.0;
    double high = 0.0;
    int seen = 0;
    for (int k = 0; k < kBearings; ++k) {
      const auto at =
          curve.pixel_of({range, wrap_angle(2.0 * std::numbers::pi * k / kBearings)}, 0.0);
      if (!at) continue;
      const auto place = curve.floor_with_band(*at, 0.0);
      if (!place) continue;
      radius_px += radius(*at);
      low += std::log(place->band95_low_m);
      high += std::log(place->band95_high_m);
      ++seen;
    }
    if (seen < kBearings / 2) continue;
    samples.push_back({{"radius_px", radius_px / seen},
                       {"range_m", range},
                       {"low_m", std::exp(low / seen)},
                       {"high_m", std::exp(high / seen)}});
  }
  ordered_json points = ordered_json::array();
  for (const Mark& mark : marks) {
    points.push_back({{"radius_px", radius(mark.pixel)},
                      {"range_m", mark.range_m},
                      {"flagged",
                       std::find(shown.flagged.begin(), shown.flagged.end(), mark.line) !=
                           shown.flagged.end()}});
  }
  return {{"samples", std::move(samples)},
          {"points", std::move(points)},
          {"model", shown.model},
          {"rms_px", number(shown.rms_px)},
          {"leave_one_out_relative", number(shown.leave_one_out_relative)},
          {"reach_m", shown.reach_m}};
}

nlohmann::ordered_json Bench::places_json(const Curve& curve,
                                          const std::vector<Mark>& marks,
                                          const VenueSpec& venue) {
  ordered_json places = ordered_json::array();
  for (const Mark& mark : marks) {
    const ObjectSpec* object = venue.find_object(mark.object);
    const auto spot =
        curve.curve->floor_at(mark.pixel, object != nullptr ? object->seen_height_m() : 0.0);
    if (!spot) continue;
    places.push_back({{"line", mark.line},
                      {"range_m", spot->range_m},
                      {"bearing_deg", spot->bearing_rad * kDegPerRad}});
  }
  return places;
}

void Bench::describe_files(ordered_json& answer) const {
  ordered_json files = ordered_json::object();
  for (const std::string& name : venue_files()) {
    std::error_code error;
    const std::uintmax_t size = fs::file_size(folder_ / name, error);
    if (!error && size > kMostSheetBytes) continue;
    const std::string text = content_of(folder_ / name);
    files[name] = {{"text", text}, {"sha", sha256_hex(text)}};
  }
  answer["files"] = std::move(files);
}

namespace {

/// The sheet's lines with their numbers, as its rows were read from them.
std::string line_of(const std::vector<std::string>& lines, int number) {
  const auto index = static_cast<std::size_t>(number - 1);
  return number >= 1 && index < lines.size() ? lines[index] : std::string();
}

std::vector<std::string> split_lines(const std::string& text) {
  std::vector<std::string> lines;
  std::size_t from = 0;
  while (from < text.size()) {
    const std::size_t end = std::min(text.find('\n', from), text.size());
    std::string line = text.substr(from, end - from);
    if (!line.empty() && line.back() == '\r') line.pop_back();
    lines.push_back(std::move(line));
    from = end + 1;
  }
  return lines;
}

std::string points_text(const std::vector<ImagePoint>& points) {
  std::string out;
  for (const ImagePoint& p : points) {
    out += fmt::format("{}{} {}", out.empty() ? "" : " ", number_text(p.u_px), number_text(p.v_px));
  }
  return out;
}

std::pair<const char*, std::string> shape_of(const Region& region) {
  if (const auto* disc = std::get_if<Disc>(&region)) {
    return {"disc", points_text({disc->centre}) + " " + number_text(disc->radius_px)};
  }
  if (const auto* box = std::get_if<Box>(&region)) {
    return {"box", points_text({box->low, box->high})};
  }
  if (const auto* polygon = std::get_if<Polygon>(&region)) {
    return {"polygon", points_text(polygon->corners)};
  }
  return {"grow", points_text({std::get<Grow>(region).seed})};
}

ordered_json box_json(const colour::HsvBox& box) {
  return {{"h", {box.h.from, box.h.to}}, {"s", box.s}, {"v", box.v}};
}

ordered_json colours_json(const fs::path& file) {
  ordered_json objects = ordered_json::object();
  for (const colour::ChosenSet& chosen : colour::read_chosen_sets(file)) {
    ordered_json boxes = ordered_json::array();
    for (const colour::HsvBox& box : chosen.set.boxes) boxes.push_back(box_json(box));
    ordered_json recalls = ordered_json::object();
    for (const auto& [light, recall] : chosen.recall_by_light) {
      recalls[light.empty() ? "unnamed" : light] = recall;
    }
    ordered_json collisions = ordered_json::array();
    for (const colour::Collision& c : chosen.collisions) {
      collisions.push_back(fmt::format("in {} {:.0f} % of its colours are those of {} in {}",
                                       c.light.empty() ? "the unnamed light" : c.light,
                                       100.0 * c.share,
                                       c.with,
                                       c.with_light.empty() ? "the unnamed light" : c.with_light));
    }
    ordered_json entry = {{"boxes", boxes},
                          {"recall_by_light", recalls},
                          {"worst_light", chosen.worst_light},
                          {"false_positive_rate", chosen.false_positive_rate},
                          {"score", chosen.score},
                          {"collisions", collisions},
                          {"advice", chosen.advice}};
    if (chosen.envelope.stops) entry["stops"] = *chosen.envelope.stops;
    if (chosen.envelope.kelvin) entry["kelvin"] = *chosen.envelope.kelvin;
    objects[chosen.set.object] = std::move(entry);
  }
  return {{"objects", std::move(objects)}};
}

/// check.json as the page shows it; nothing where it is damaged.
void describe_check(const fs::path& file, ordered_json& answer) {
  answer["check"] = nullptr;
  answer["check_rows"] = ordered_json::array();
  if (!is_file(file)) return;
  const auto document = ordered_json::parse(read_file(file), nullptr, false);
  if (!document.is_object() || !document.contains("accepted")) return;
  ordered_json check = document;
  for (const char* key : {"measurements", "made_from", "groups", "hypotheses", "worst"}) {
    check.erase(key);
  }
  answer["check"] = std::move(check);
  const auto rows = document.find("measurements");
  if (rows == document.end() || !rows->is_array()) return;
  const double share_of_miss = 1e6;
  for (const auto& row : *rows) {
    if (answer["check_rows"].size() >= kMostRowsShown) break;
    ordered_json shown = row;
    const std::string state = row.value("state", "");
    if (state == "found" && row.contains("range_error_m")) {
      shown["error_share"] = std::abs(row["range_error_m"].get<double>()) /
                             std::max(0.05, row.value("tape_range_m", 1.0));
    } else if (state == "missed" || state == "elsewhere" || state == "false find") {
      shown["error_share"] = share_of_miss;
      shown["within"] = false;
    } else {
      shown["error_share"] = 0.0;
    }
    answer["check_rows"].push_back(std::move(shown));
  }
}

struct Next {
  std::string text, station, run, label;
};

Next next_of(const Workspace& w, const ordered_json& answer) {
  const auto state = [&](const char* name) {
    for (const auto& step : answer["steps"]) {
      if (step["name"] == name) return step["state"].get<std::string>();
    }
    return std::string();
  };
  const auto open = [&](const char* name) {
    return state(name) == "missing" || state(name) == "stale";
  };
  const auto refused = [&](const char* name) { return state(name) == "refused"; };
  const auto refusal = [&](const char* name, const char* station) {
    return Next{fmt::format("the step '{}' was refused; see why and mend it.", name),
                station,
                "",
                "Look at it"};
  };
  const bool frames = !w.frames.empty();
  if (!frames && !w.venue.centre) {
    return {"wheels up, then take a dozen frames in each light, turning the robot between them.",
            "frames",
            "",
            "To the frames"};
  }
  if (open("centre"))
    return {"find the mirror's rim and centre.", "centre", "centre", "Find the centre"};
  if (refused("centre")) return refusal("centre", "centre");
  if (w.frames.size() >= 2 || !w.strokes.empty()) {
    if (open("mask"))
      return {"find what the robot hides of its own view.", "mask", "mask", "Find the mask"};
    if (refused("mask")) return refusal("mask", "mask");
  }
  if (w.marks.empty() && !w.rig.mirror) {
    return {
        "pair a few pixels with places you measured with the tape.", "marks", "", "To the marks"};
  }
  if (open("range")) return {"fit the range curve.", "marks", "range", "Fit the curve"};
  if (refused("range")) return refusal("range", "marks");
  if (w.marks.size() < 2) {
    return {"measure a mark or two: the drawing alone leaves a wide band.",
            "marks",
            "",
            "To the marks"};
  }
  if (w.venue.objects.empty()) {
    return {"name the objects to look for in venue.yaml.", "files", "", "To the files"};
  }
  for (const ObjectSpec& object : w.venue.objects) {
    const bool painted = std::any_of(w.swatches.begin(), w.swatches.end(), [&](const Swatch& s) {
      return s.label == object.name;
    });
    if (!painted) {
      return {fmt::format("paint {} in a frame of every light, near and far.", object.name),
              "colours",
              "",
              "To the colours"};
    }
  }
  if (open("colours"))
    return {"search the thresholds that hold in every light.", "colours", "colours", "Search"};
  if (refused("colours")) return refusal("colours", "colours");
  if (open("tables"))
    return {"make the tables for the boards.", "tables", "tables", "Make the tables"};
  if (refused("tables")) return refusal("tables", "tables");
  if (w.tape.empty()) {
    return {"download the tables; to prove them, fill in tape.csv.", "files", "", "To the files"};
  }
  if (open("check")) return {"hold the frames against the tape sheet.", "check", "check", "Check"};
  if (refused("check")) return refusal("check", "check");
  if (answer["check"].is_object() && answer["check"].value("accepted", false)) {
    return {"accepted. Download the files for the boards.", "tables", "", "To the tables"};
  }
  return {"not accepted; see the reasons and the likely cause.", "check", "", "To the verdict"};
}

}  // namespace

void Bench::describe(const Workspace& w, ordered_json& answer) {
  const VenueSpec& venue = w.venue;
  answer["name"] = venue.name;
  answer["rig"] = {{"width_px", w.rig.camera.width_px},
                   {"height_px", w.rig.camera.height_px},
                   {"drawing", w.rig.mirror.has_value()},
                   {"robot_radius_m", w.rig.mounting.robot_radius_m}};
  answer["link"] = {{"near_m", venue.link.near_m},
                    {"far_m", venue.link.far_m},
                    {"range_bits", venue.link.range_bits},
                    {"baud", venue.link.baud},
                    {"table_bytes", venue.budget.table_bytes}};
  for (const ObjectSpec& object : venue.objects) {
    answer["objects"].push_back({{"name", object.name}, {"height_m", object.seen_height_m()}});
  }
  const std::vector<std::string> mark_lines = split_lines(content_of(folder_ / "marks.csv"));
  for (const Mark& mark : w.marks) {
    answer["marks"].push_back(
        {{"line", mark.line},
         {"text", line_of(mark_lines, mark.line)},
         {"image", mark.image},
         {"u_px", mark.pixel.u_px},
         {"v_px", mark.pixel.v_px},
         {"object", mark.object},
         {"range_m", mark.range_m},
         {"bearing_deg",
          mark.bearing_rad ? ordered_json(std::round(*mark.bearing_rad * kDegPerRad * 1e6) / 1e6)
                           : ordered_json()}});
  }
  const std::vector<std::string> swatch_lines = split_lines(content_of(folder_ / "swatches.csv"));
  for (const Swatch& swatch : w.swatches) {
    const auto [shape, points] = shape_of(swatch.region);
    answer["swatches"].push_back({{"line", swatch.line},
                                  {"text", line_of(swatch_lines, swatch.line)},
                                  {"image", swatch.image},
                                  {"label", swatch.label},
                                  {"shape", shape},
                                  {"points", points}});
  }
  const std::vector<std::string> stroke_lines = split_lines(content_of(folder_ / "strokes.csv"));
  for (const Stroke& stroke : w.strokes) {
    answer["strokes"].push_back({{"line", stroke.line},
                                 {"text", line_of(stroke_lines, stroke.line)},
                                 {"kind", stroke.hide ? "hide" : "show"},
                                 {"width_px", stroke.width_px},
                                 {"points", points_text(stroke.points)}});
  }
  answer["tape_rows"] = w.tape.size();

  for (auto& step : answer["steps"]) {
    const auto name = step["name"].get<std::string>();
    const StepState state = state_of(w, name);
    step["state"] = state.freshness == Freshness::fresh   ? "fresh"
                    : state.freshness == Freshness::stale ? "stale"
                                                          : "missing";
    step["changed"] = state.changed;
    if (state.freshness == Freshness::fresh) continue;
    std::string inputs;
    for (const auto& [input, hash] : inputs_of(w, name)) inputs += input + hash;
    const std::lock_guard lock(failing_);
    const auto failure = failures_.find(name);
    if (failure == failures_.end()) continue;
    if (failure->second.inputs == inputs) {
      step["state"] = "refused";
      step["problem"] = failure->second.text;
    } else {
      failures_.erase(failure);
    }
  }

  if (is_file(result_of(w, "centre"))) {
    const CentreResult centre = read_centre(result_of(w, "centre"));
    answer["centre"] = {
        {"centre",
         {{"u_px", centre.centre.at.u_px},
          {"v_px", centre.centre.at.v_px},
          {"sd_px", std::sqrt(0.5 * (centre.centre.cov_px2[0] + centre.centre.cov_px2[2]))}}},
        {"frames_used", centre.frames_used},
        {"frames_disagree", centre.frames_disagree}};
    if (centre.rim) {
      answer["centre"]["rim"] = {{"a_px", centre.rim->a_px},
                                 {"b_px", centre.rim->b_px},
                                 {"angle_deg", centre.rim->angle_rad * kDegPerRad}};
    }
  }
  if (is_file(result_of(w, "mask"))) {
    const YAML::Node mask = YAML::LoadFile(result_of(w, "mask").string());
    answer["mask"] = {{"visible_fraction", mask["visible_fraction"].as<double>(0.0)},
                      {"frames_used", mask["frames_used"].as<int>(0)}};
  }
  const auto shape = geometry();
  if (!shape->mask.empty()) {
    answer["mask_stamp"] = sha256_hex(hashes({"results/mask.png", "strokes.csv"})).substr(0, 16);
  }
  answer["blind_zone"] = shape->blind_zone;
  if (shape->curve) {
    answer["has_range"] = true;
    answer["curve"] = curve_json(*shape->curve, w.marks, venue);
    answer["mark_places"] = places_json(*shape->curve, w.marks, venue);
    answer["flagged"] = shape->curve->flagged;
    answer["flag_reasons"] = shape->curve->reasons;
    answer["reach_m"] = shape->curve->reach_m;
  }
  if (is_file(result_of(w, "colours"))) {
    answer["colours"] = colours_json(result_of(w, "colours"));
    answer["colours_stamp"] = sha256_hex(hashes({"results/colours.yaml"})).substr(0, 16);
  }
  const fs::path tables = w.results() / "tables";
  if (is_file(tables / "tables.json")) {
    auto document = ordered_json::parse(read_file(tables / "tables.json"), nullptr, false);
    if (document.is_object()) {
      answer["artefacts"] = document.value("files", ordered_json::array());
      answer["tables"] = std::move(document);
    }
  }
  describe_check(result_of(w, "check"), answer);
  const Next next = next_of(w, answer);
  answer["next"] = {
      {"text", next.text}, {"station", next.station}, {"run", next.run}, {"label", next.label}};
}

nlohmann::ordered_json Bench::everything() {
  const ordered_json none = ordered_json::array();
  ordered_json answer = {{"name", folder_.filename().string()},
                         {"folder", folder_.string()},
                         {"rig", {{"width_px", 320}, {"height_px", 240}, {"robot_radius_m", 0.0}}},
                         {"link",
                          {{"near_m", 0.15},
                           {"far_m", 3.0},
                           {"range_bits", 7},
                           {"baud", 115200},
                           {"table_bytes", 1024}}},
                         {"objects", none},
                         {"frames", none},
                         {"marks", none},
                         {"swatches", none},
                         {"strokes", none},
                         {"tape_rows", 0},
                         {"steps", none},
                         {"centre", nullptr},
                         {"mask", nullptr},
                         {"mask_stamp", ""},
                         {"blind_zone", none},
                         {"curve", nullptr},
                         {"mark_places", none},
                         {"flagged", none},
                         {"flag_reasons", none},
                         {"reach_m", 0.0},
                         {"has_range", false},
                         {"colours", nullptr},
                         {"colours_stamp", ""},
                         {"tables", nullptr},
                         {"artefacts", none},
                         {"check", nullptr},
                         {"check_rows", none},
                         {"problems", none},
                         {"running", ""}};
  for (const std::string& step : step_names()) {
    answer["steps"].push_back({{"name", step}, {"state", "missing"}, {"problem", ""}});
  }
  const std::string now = stamp();
  answer["stamp"] = now;
  describe_files(answer);
  std::vector<Problem> nested;
  const std::vector<FrameFile> frames = list_frames(folder_, nested);
  try {
    const std::shared_ptr<const Workspace> w = workspace();
    describe(*w, answer);
    check_frames(*w);
  } catch (const InputError& error) {
    answer["problems"] = lines_of(error);
    answer["next"] = {{"text", answer["problems"][0].get<std::string>()},
                      {"station", "files"},
                      {"run", ""},
                      {"label", "To the files"}};
  }
  {
    const std::lock_guard lock(failing_);
    for (const FrameFile& frame : frames) {
      const auto checked = frame_checks_.find(frame.image);
      answer["frames"].push_back(
          {{"image", frame.image},
           {"light", frame.light},
           {"problem", checked == frame_checks_.end() ? std::string() : checked->second.second}});
    }
  }
  const std::lock_guard lock(edits_);
  answer["undo"] = journal_.undoable();
  answer["redo"] = journal_.redoable();
  return answer;
}

void Bench::check_frames(const Workspace& w) {
  std::vector<vision::FrameToLoad> fresh;
  std::vector<std::string> hashes;
  {
    const std::lock_guard lock(failing_);
    for (const FrameFile& file : w.frames) {
      std::string hash = hashes_->hash_of(file.path) +
                         fmt::format(" {}x{}", w.rig.camera.width_px, w.rig.camera.height_px);
      const auto checked = frame_checks_.find(file.image);
      if (checked != frame_checks_.end() && checked->second.first == hash) continue;
      fresh.push_back({file.image, file.light, file.path});
      hashes.push_back(std::move(hash));
    }
  }
  if (fresh.empty()) return;
  Progress silent;
  const vision::LoadedFrames loaded = vision::load_frames(fresh, w.rig.camera, silent);
  const std::lock_guard lock(failing_);
  for (std::size_t i = 0; i < fresh.size(); ++i) {
    std::string what;
    const auto bad =
        std::find_if(loaded.left_out.begin(), loaded.left_out.end(), [&](const Problem& problem) {
          return problem.where == fresh[i].path.string() || problem.where == fresh[i].image;
        });
    if (bad != loaded.left_out.end()) what = bad->what;
    frame_checks_[fresh[i].image] = {hashes[i], what};
  }
}

}  // namespace rondel::app
