#include <fmt/format.h>

#include <algorithm>
#include <filesystem>
#include <set>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "calib/colour/choose.h"
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

ordered_json json_of(const colour::ChosenSet& chosen) {
  ordered_json boxes = ordered_json::array();
  for (const colour::HsvBox& box : chosen.set.boxes) {
    boxes.push_back({{"h", {box.h.from, box.h.to}}, {"s", box.s}, {"v", box.v}});
  }
  const colour::Envelope& envelope = chosen.envelope;
  return {{"boxes", boxes},
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
            {"broken_by", envelope.broken_by}}}};
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
  return text + '\n';
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
  write_file(workspace.results() / "colours.yaml",
             with_made_from(colour::sets_yaml(sets), inputs_of(workspace, "colours")));
  return outcome;
}

}  // namespace rondel::app
