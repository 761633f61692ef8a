#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <filesystem>
#include <set>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "calib/colour/board_scale.h"
#include "calib/colour/choose.h"
#include "calib/colour/planes.h"
#include "calib/colour/sets_file.h"
#include "tools/rondel/frames.h"
#include "tools/rondel/results.h"
#include "tools/rondel/steps/step.h"
#include "vision/mask/mask_file.h"
#include "vision/swatch/collect.h"

namespace rondel::app {
namespace {

using nlohmann::ordered_json;

constexpr std::size_t kMostNotes = 5;

std::string light_name(const std::string& light) { return light.empty() ? "(unnamed)" : light; }

/// Every object needs swatches, and there must be something around them.
void check_swatches(const Workspace& workspace) {
  const std::string sheet = (workspace.folder / "swatches.csv").string();
  if (workspace.venue.objects.empty()) {
    throw InputError((workspace.folder / "venue.yaml").string(),
                     "objects: none; name what the board is to find");
  }
  if (workspace.swatches.empty()) {
    throw InputError(sheet,
                     "has no rows; label at least one patch of every object: "
                     "image,label,shape,points");
  }
  std::vector<Problem> problems;
  for (const ObjectSpec& object : workspace.venue.objects) {
    const bool any = std::any_of(workspace.swatches.begin(),
                                 workspace.swatches.end(),
                                 [&](const Swatch& s) { return s.label == object.name; });
    if (!any) {
      problems.push_back(
          {sheet,
           fmt::format("{}: has no swatch; label it in every light, near and far", object.name)});
    }
  }
  if (!problems.empty()) throw InputError(std::move(problems));
}

cv::Mat mask_of(const Workspace& workspace, Progress& progress) {
  const std::filesystem::path path = workspace.results() / "mask.png";
  std::error_code error;
  if (std::filesystem::is_regular_file(path, error)) {
    return vision::read_mask(path, workspace.rig.camera);
  }
  progress.note("no mask yet: the robot's own body counts as surroundings; run 'rondel mask'");
  return {workspace.rig.camera.height_px, workspace.rig.camera.width_px, CV_8U, cv::Scalar(255)};
}

vision::LoadedFrames load_labelled_frames(const Workspace& workspace, Progress& progress) {
  std::set<std::string> named;
  for (const Swatch& swatch : workspace.swatches) named.insert(swatch.image);
  std::vector<FrameFile> files;
  std::set<std::string> listed;
  for (const FrameFile& file : workspace.frames) {
    if (!named.contains(file.image)) continue;
    files.push_back(file);
    listed.insert(file.image);
  }
  for (const std::string& image : named) {  // images outside frames/
    if (!listed.contains(image)) files.push_back({image, "", workspace.folder / image});
  }
  vision::LoadedFrames loaded = load_frames(files, workspace.rig.camera, progress);
  if (!loaded.left_out.empty()) throw InputError(std::move(loaded.left_out));
  return loaded;
}

ordered_json json_of(const std::vector<std::pair<std::string, double>>& recalls) {
  ordered_json out = ordered_json::object();
  for (const auto& [light, recall] : recalls) out[light_name(light)] = recall;
  return out;
}

ordered_json json_of(const std::optional<std::array<double, 2>>& range) {
  return range ? ordered_json{(*range)[0], (*range)[1]} : ordered_json{};
}

ordered_json boxes_json(const colour::ThresholdSet& set) {
  ordered_json boxes = ordered_json::array();
  for (const colour::HsvBox& box : set.boxes) {
    boxes.push_back({{"h", {box.h.from, box.h.to}}, {"s", box.s}, {"v", box.v}});
  }
  return boxes;
}

double recall_in(const colour::ChosenSet& chosen, const std::string& light) {
  for (const auto& [name, recall] : chosen.recall_by_light) {
    if (name == light) return recall;
  }
  return 0.0;
}

ordered_json json_of(const colour::ChosenSet& chosen) {
  const colour::Envelope& envelope = chosen.envelope;
  ordered_json collisions = ordered_json::array();
  for (const colour::Collision& one : chosen.collisions) {
    collisions.push_back({{"light", light_name(one.light)},
                          {"change", one.change},
                          {"with", one.with},
                          {"with_light", light_name(one.with_light)},
                          {"with_change", one.with_change},
                          {"share", one.share}});
  }
  ordered_json per_light = ordered_json::object();
  for (const colour::LightSet& one : chosen.per_light) {
    per_light[light_name(one.light)] = {{"boxes", boxes_json(one.set)},
                                        {"score", one.score},
                                        {"gain", one.score - recall_in(chosen, one.light)}};
  }
  return {{"boxes", boxes_json(chosen.set)},
          {"recall_by_light", json_of(chosen.recall_by_light)},
          {"recall_as_captured", json_of(chosen.recall_as_captured)},
          {"worst_light", light_name(chosen.worst_light)},
          {"worst_change", chosen.worst_change},
          {"false_positive_rate", chosen.false_positive_rate},
          {"score", chosen.score},
          {"bound", chosen.bound},
          {"gap", chosen.gap},
          {"envelope",
           {{"stops", json_of(envelope.stops)},
            {"kelvin", json_of(envelope.kelvin)},
            {"broken_by", envelope.broken_by}}},
          {"one_box_score", chosen.one_box_score},
          {"collisions", collisions},
          {"advice", chosen.advice},
          {"per_light", per_light}};
}

template <class Grid>
ordered_json grid_json(const Grid& grid) {
  ordered_json rows = ordered_json::array();
  for (const auto& row : grid) {
    ordered_json cells = ordered_json::array();
    for (const auto value : row)
      cells.push_back(std::round(1000.0 * static_cast<double>(value)) / 1000.0);
    rows.push_back(std::move(cells));
  }
  return rows;
}

/// What the report and the desk draw: densities, and the envelope as a map.
ordered_json pictures_of(const std::vector<colour::LightSamples>& lights,
                         const std::vector<colour::ChosenSet>& sets,
                         const colour::ChooseOptions& options) {
  std::vector<const colour::RgbCounts*> around;
  for (const colour::LightSamples& light : lights) around.push_back(&light.surroundings);
  const colour::Planes surroundings = colour::planes_of(around);
  ordered_json out = ordered_json::object();
  for (std::size_t o = 0; o < sets.size(); ++o) {
    std::vector<const colour::RgbCounts*> own;
    for (const colour::LightSamples& light : lights) own.push_back(&light.objects[o]);
    const colour::Planes object = colour::planes_of(own);
    const colour::EnvelopeMap map = colour::envelope_map(lights, o, sets[o].set, options);
    out[sets[o].set.object] = {
        {"hs", {{"object", grid_json(object.hs)}, {"surroundings", grid_json(surroundings.hs)}}},
        {"sv", {{"object", grid_json(object.sv)}, {"surroundings", grid_json(surroundings.sv)}}},
        {"envelope_map",
         {{"stops", map.stops}, {"kelvin", map.kelvin}, {"recall", grid_json(map.recall)}}}};
  }
  return out;
}

std::string summary_of(const colour::ChosenSet& chosen) {
  const auto percent = [](double share) { return fmt::format("{:.1f} %", 100.0 * share); };
  std::string text = fmt::format("{}: {} box{}, worst light {} ({}) {} of its pixels",
                                 chosen.set.object,
                                 chosen.set.boxes.size(),
                                 chosen.set.boxes.size() == 1 ? "" : "es",
                                 light_name(chosen.worst_light),
                                 chosen.worst_change,
                                 percent(chosen.score));
  text += fmt::format(", {:.1e} of the surroundings", chosen.false_positive_rate);
  const colour::Envelope& envelope = chosen.envelope;
  if (envelope.stops && envelope.kelvin) {
    text += fmt::format("; holds from {:+.1f} to {:+.1f} stops and from {:.0f} to {:.0f} K",
                        (*envelope.stops)[0],
                        (*envelope.stops)[1],
                        (*envelope.kelvin)[0],
                        (*envelope.kelvin)[1]);
  } else {
    text += "; too few for the wanted recall even as captured";
  }
  text += '\n';
  for (const colour::Collision& one : chosen.collisions) {
    text += fmt::format("  in {} ({}) it looks like {} in {} ({}): {} of that\n",
                        light_name(one.light),
                        one.change,
                        one.with == kSurroundings ? "the surroundings" : one.with,
                        light_name(one.with_light),
                        one.with_change,
                        percent(one.share));
  }
  for (const std::string& advice : chosen.advice) text += "  " + advice + '\n';
  return text;
}

void note_look_alikes(const Workspace& workspace,
                      const std::vector<vision::LookAlike>& look_alikes,
                      Progress& progress) {
  for (std::size_t k = 0; k < std::min(kMostNotes, look_alikes.size()); ++k) {
    const vision::LookAlike& one = look_alikes[k];
    progress.note(fmt::format(
        "{}: {} px at ({:.0f}, {:.0f}) px look like {} without a swatch; left out. Label it, or "
        "paint it 'surroundings'",
        one.image,
        one.area_px,
        one.at.u_px,
        one.at.v_px,
        workspace.venue.objects[static_cast<std::size_t>(one.object)].name));
  }
  if (look_alikes.size() > kMostNotes) {
    progress.note(fmt::format("and {} more places like that", look_alikes.size() - kMostNotes));
  }
}

}  // namespace

Outcome colours_step(const Workspace& workspace, Progress& progress) {
  check_swatches(workspace);
  const VenueSpec& venue = workspace.venue;
  const cv::Mat mask = mask_of(workspace, progress);
  const vision::LoadedFrames loaded = load_labelled_frames(workspace, progress);
  const vision::Labelled labelled =
      vision::collect(loaded.frames, workspace.swatches, venue.objects, mask, progress);
  note_look_alikes(workspace, labelled.look_alikes, progress);

  std::vector<std::string> names;
  for (const ObjectSpec& object : venue.objects) names.push_back(object.name);
  std::vector<Problem> problems;
  for (std::size_t o = 0; o < names.size(); ++o) {
    std::string without;
    int pixels = 0;
    for (std::size_t l = 0; l < labelled.lights.size(); ++l) {
      const int here = labelled.swatch_pixels[l][o];
      pixels += here;
      if (here == 0) {
        without +=
            fmt::format("{}{}", without.empty() ? "" : ", ", light_name(labelled.lights[l].light));
      }
    }
    if (pixels == 0) {
      problems.push_back({(workspace.folder / "swatches.csv").string(),
                          fmt::format("{}: all of its swatches lie behind the mask; label it where "
                                      "the floor is seen",
                                      names[o])});
    } else if (!without.empty()) {
      progress.note(fmt::format(
          "{} has no swatch in: {}; it is not judged in that light", names[o], without));
    }
  }
  if (!problems.empty()) throw InputError(std::move(problems));

  colour::ChooseOptions options;
  options.changes = colour::changes_of(venue.lighting);
  options.false_positive_cap = venue.false_positive_cap;
  options.recall = venue.tolerance.recall;
  options.middle_kelvin = colour::middle_kelvin(venue.lighting);
  options.per_light = !venue.lights.empty();
  options.search.stop = [&] { return progress.cancelled(); };
  const std::vector<colour::ChosenSet> sets =
      colour::choose_sets(labelled.lights, names, options, progress);

  Outcome outcome;
  ordered_json objects = ordered_json::object();
  for (const colour::ChosenSet& chosen : sets) {
    objects[chosen.set.object] = json_of(chosen);
    outcome.summary += summary_of(chosen);
  }
  ordered_json look_alikes = ordered_json::array();
  for (const vision::LookAlike& one : labelled.look_alikes) {
    look_alikes.push_back({{"image", one.image},
                           {"object", names[static_cast<std::size_t>(one.object)]},
                           {"u_px", one.at.u_px},
                           {"v_px", one.at.v_px},
                           {"area_px", one.area_px}});
  }
  outcome.document = {{"objects", objects}, {"unlabelled", look_alikes}};
  ordered_json details = outcome.document;
  details["pictures"] = pictures_of(labelled.lights, sets, options);
  std::vector<colour::ThresholdSet> plain;
  for (const colour::ChosenSet& chosen : sets) plain.push_back(chosen.set);
  write_file(workspace.results() / "colours.json", details.dump());
  write_file(workspace.results() / "colours.csv", colour::sets_csv(plain, venue.hsv_scale));
  write_file(workspace.results() / "colours.yaml",
             with_made_from(colour::sets_yaml(sets), inputs_of(workspace, "colours")));
  return outcome;
}

}  // namespace rondel::app
