#include "tools/rondel/workspace.h"

#include <fmt/format.h>

#include <algorithm>
#include <system_error>
#include <utility>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "calib/venue/read_sheets.h"
#include "calib/venue/read_yaml.h"
#include "calib/venue/words.h"
#include "tools/rondel/hash_store.h"
#include "vision/frames/load.h"

namespace rondel::app {
namespace {

namespace fs = std::filesystem;

/// The file's text; nothing when it is not there, nothing and a problem when it cannot be read.
std::optional<std::string> text_if_any(const fs::path& path, std::vector<Problem>& problems) {
  std::error_code error;
  if (!fs::exists(path, error)) return std::nullopt;
  try {
    return read_file(path);
  } catch (const InputError& unreadable) {
    problems.insert(problems.end(), unreadable.problems().begin(), unreadable.problems().end());
    return std::nullopt;
  }
}

std::optional<std::string> text_needed(const fs::path& path, std::vector<Problem>& problems) {
  const std::size_t before = problems.size();
  auto text = text_if_any(path, problems);
  if (!text && problems.size() == before) {
    problems.push_back(
        {path.string(), "is missing; 'rondel new' writes one into a new folder to start from"});
  }
  return text;
}

/// What is wrong with an image's name, held against the listed frames and the folder.
std::optional<std::string> trouble_with_image(const std::string& image,
                                              const fs::path& folder,
                                              const std::vector<std::string>& listed) {
  if (std::binary_search(listed.begin(), listed.end(), image)) return std::nullopt;
  const fs::path relative(image);
  if (relative.is_absolute() ||
      std::find(relative.begin(), relative.end(), "..") != relative.end()) {
    return "must be named relative to the folder, as in frames/noon/0001.png";
  }
  if (image.find('\\') != std::string::npos) {
    return "write '/' between folders, as in frames/noon/0001.png";
  }
  std::error_code error;
  if (fs::is_regular_file(folder / relative, error)) {
    if (vision::is_image_name(relative)) return std::nullopt;
    return "is no image by its ending (.png .jpg .jpeg .bmp .ppm .pgm .565 .rgb565)";
  }
  std::vector<std::string> same_name;
  for (const std::string& candidate : listed) {
    if (fs::path(candidate).filename() == relative.filename()) same_name.push_back(candidate);
  }
  if (same_name.size() == 1) {
    return fmt::format("there is no such image; did you mean '{}'?", same_name.front());
  }
  if (const auto meant = near_miss(image, listed)) {
    return fmt::format("there is no such image; did you mean '{}'?", *meant);
  }
  return "there is no such image; name it from the folder on, as in frames/noon/0001.png";
}

std::vector<std::string> names_of(const std::vector<FrameFile>& frames) {
  std::vector<std::string> names;
  names.reserve(frames.size());
  for (const FrameFile& frame : frames) names.push_back(frame.image);
  std::sort(names.begin(), names.end());
  return names;
}

void check_folder(const fs::path& folder) {
  std::error_code error;
  if (fs::is_directory(folder, error)) return;
  if (fs::exists(folder, error)) {
    throw InputError(folder.string(), "is a file; a venue is a folder with a venue.yaml");
  }
  throw InputError(folder.string(), "there is no such folder; 'rondel new' starts a venue");
}

void check_centre_in_image(const Workspace& workspace,
                           const std::string& file,
                           std::vector<Problem>& problems) {
  const CameraSpec& camera = workspace.rig.camera;
  if (!workspace.venue.centre || camera.width_px == 0 || camera.height_px == 0) return;
  const ImagePoint at = workspace.venue.centre->centre;
  if (at.u_px > camera.width_px - 0.5 || at.v_px > camera.height_px - 0.5) {
    problems.push_back({file,
                        fmt::format("centre = {}, {}: is outside the image of {} x {} pixels",
                                    at.u_px,
                                    at.v_px,
                                    camera.width_px,
                                    camera.height_px)});
  }
}

}  // namespace

std::vector<FrameFile> list_frames(const fs::path& folder, std::vector<Problem>& problems) {
  std::vector<FrameFile> frames;
  const fs::path root = folder / "frames";
  std::error_code error;
  if (!fs::is_directory(root, error)) return frames;
  const auto add_images = [&](const fs::path& inside, const std::string& light) {
    for (const auto& entry : fs::directory_iterator(inside)) {
      const std::string name = entry.path().filename().string();
      if (name.front() == '.') continue;
      if (entry.is_directory()) {
        if (!light.empty()) {
          problems.push_back({entry.path().string(),
                              "is a folder inside a light's folder; put its images into "
                              "frames/LIGHT/"});
        }
        continue;
      }
      if (!vision::is_image_name(name)) continue;
      frames.push_back({light.empty() ? "frames/" + name : fmt::format("frames/{}/{}", light, name),
                        light,
                        entry.path()});
    }
  };
  add_images(root, "");
  for (const auto& entry : fs::directory_iterator(root)) {
    const std::string name = entry.path().filename().string();
    if (entry.is_directory() && name.front() != '.') add_images(entry.path(), name);
  }
  std::sort(frames.begin(), frames.end(), [](const FrameFile& a, const FrameFile& b) {
    return a.image < b.image;
  });
  return frames;
}

Workspace open_workspace(const fs::path& folder) {
  check_folder(folder);
  Workspace workspace;
  workspace.folder = folder;
  workspace.hashes = std::make_shared<HashStore>();
  std::vector<Problem> problems;
  const std::string venue_file = (folder / "venue.yaml").string();
  const std::string rig_file = (folder / "rig.yaml").string();
  if (const auto text = text_needed(folder / "venue.yaml", problems)) {
    workspace.venue = read_venue(*text, venue_file, problems);
  }
  if (workspace.venue.name.empty()) {
    const fs::path named = fs::weakly_canonical(folder);
    workspace.venue.name = (named.has_filename() ? named : named.parent_path()).filename().string();
  }
  if (const auto text = text_needed(folder / "rig.yaml", problems)) {
    workspace.rig = read_rig(*text, rig_file, folder, problems);
  }
  check_centre_in_image(workspace, venue_file, problems);
  workspace.frames = list_frames(folder, problems);
  const std::vector<std::string> listed = names_of(workspace.frames);
  const SheetContext context{workspace.venue, workspace.rig.camera, [&](const std::string& image) {
                               return trouble_with_image(image, folder, listed);
                             }};
  const auto sheet = [&](const char* name, auto reader, auto& rows) {
    const fs::path path = folder / name;
    if (const auto text = text_if_any(path, problems)) {
      rows = reader(*text, path.string(), context, problems);
    }
  };
  sheet("marks.csv", read_marks, workspace.marks);
  sheet("swatches.csv", read_swatches, workspace.swatches);
  sheet("strokes.csv", read_strokes, workspace.strokes);
  sheet("tape.csv", read_tape, workspace.tape);
  if (!problems.empty()) throw InputError(std::move(problems));
  return workspace;
}

Batch open_batch(const Workspace& workspace, const fs::path& folder) {
  std::error_code error;
  if (!fs::is_directory(folder, error)) {
    throw InputError(folder.string(),
                     "there is no such folder; --batch takes one with frames/ and "
                     "tape.csv");
  }
  Batch batch;
  batch.folder = folder;
  std::vector<Problem> problems;
  batch.frames = list_frames(folder, problems);
  if (batch.frames.empty()) {
    problems.push_back({(folder / "frames").string(), "holds no images; put the batch's there"});
  }
  const std::vector<std::string> listed = names_of(batch.frames);
  const SheetContext context{workspace.venue, workspace.rig.camera, [&](const std::string& image) {
                               return trouble_with_image(image, folder, listed);
                             }};
  const fs::path tape = folder / "tape.csv";
  const std::size_t before = problems.size();
  if (const auto text = text_if_any(tape, problems)) {
    batch.tape = read_tape(*text, tape.string(), context, problems);
  } else if (problems.size() == before) {
    problems.push_back(
        {tape.string(), "is missing; its first line is image,object,range_m,bearing_deg"});
  }
  if (!problems.empty()) throw InputError(std::move(problems));
  return batch;
}

}  // namespace rondel::app
