#include <fmt/format.h>

#include <cmath>
#include <filesystem>

#include "calib/base/problem.h"
#include "tools/rondel/board.h"
#include "tools/rondel/commands/command.h"
#include "tools/rondel/frames.h"

namespace rondel::app {
namespace {

using nlohmann::ordered_json;

/// The images named on the command line: as in the CSV files relative to the venue, or any file.
/// None named: all of the venue's frames.
std::vector<FrameFile> wanted_images(const Workspace& workspace, const Arguments& arguments) {
  if (arguments.words.size() < 2) {
    if (workspace.frames.empty()) {
      throw InputError((workspace.folder / "frames").string(),
                       "holds no images; name some after the venue");
    }
    return workspace.frames;
  }
  std::vector<FrameFile> files;
  std::vector<Problem> problems;
  for (auto word = arguments.words.begin() + 1; word != arguments.words.end(); ++word) {
    std::error_code error;
    const std::filesystem::path inside = workspace.folder / *word;
    if (std::filesystem::is_regular_file(inside, error)) {
      files.push_back({*word, "", inside});
    } else if (std::filesystem::is_regular_file(*word, error)) {
      files.push_back({*word, "", *word});
    } else {
      problems.push_back({*word, "there is no such image, neither in the venue nor here"});
    }
  }
  if (!problems.empty()) throw InputError(std::move(problems));
  return files;
}

ordered_json locate_blob(const Board& board, const vision::Blob& blob) {
  const auto sub = [](double px) { return static_cast<int>(std::lround(px * link::kSubpixel)); };
  const link::Codes codes =
      link::encode(board.tables, blob.object, sub(blob.measured.u_px), sub(blob.measured.v_px));
  const auto spot = link::decode(board.tables, codes);
  ordered_json out = {
      {"object", board.detector.objects[static_cast<std::size_t>(blob.object)].name},
      {"u_px", blob.measured.u_px},
      {"v_px", blob.measured.v_px},
      {"area_px", blob.area_px},
      {"range_m", nullptr},
      {"bearing_deg", nullptr},
      {"range_code", codes.range_code},
      {"bearing_code", codes.bearing_code},
      {"cut_by_mask", blob.cut_by_mask}};
  if (spot) {
    out["range_m"] = spot->range_m;
    out["bearing_deg"] = spot->bearing_rad * kDegPerRad;
  }
  return out;
}

std::string line_of(const ordered_json& object) {
  const std::string where = object["range_m"].is_null()
                                ? "beyond the farthest code"
                                : fmt::format("{:.2f} m at {:.0f} deg",
                                              object["range_m"].get<double>(),
                                              object["bearing_deg"].get<double>());
  return fmt::format("  {}: {} (code {}, {}), {} px at ({:.1f}, {:.1f}){}\n",
                     object["object"].get<std::string>(),
                     where,
                     object["range_code"].get<int>(),
                     object["bearing_code"].get<int>(),
                     object["area_px"].get<int>(),
                     object["u_px"].get<double>(),
                     object["v_px"].get<double>(),
                     object["cut_by_mask"].get<bool>() ? ", cut by the mask" : "");
}

}  // namespace

Outcome locate_command(const Arguments& arguments, Progress& progress) {
  const Workspace workspace = open_workspace(arguments.words.at(0));
  const Board board = open_board(workspace);
  const std::vector<FrameFile> files = wanted_images(workspace, arguments);
  vision::LoadedFrames loaded = load_frames(files, workspace.rig.camera, progress);
  if (!loaded.left_out.empty()) throw InputError(std::move(loaded.left_out));
  Outcome outcome;
  ordered_json frames = ordered_json::array();
  for (const Frame& frame : loaded.frames) {
    ordered_json objects = ordered_json::array();
    outcome.summary += frame.image + '\n';
    for (const vision::Blob& blob : vision::detect(board.detector, frame.bgr)) {
      objects.push_back(locate_blob(board, blob));
      outcome.summary += line_of(objects.back());
    }
    if (objects.empty()) outcome.summary += "  nothing found\n";
    frames.push_back({{"image", frame.image}, {"objects", objects}});
  }
  outcome.document = {{"frames", frames}};
  return outcome;
}

}  // namespace rondel::app
