#include <fmt/format.h>

#include <algorithm>
#include <filesystem>
#include <opencv2/imgcodecs.hpp>
#include <thread>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "tools/rondel/commands/command.h"
#include "vision/scene/render.h"
#include "vision/scene/survey.h"

namespace rondel::app {
namespace {

std::string png(const cv::Mat& image) {
  std::vector<unsigned char> bytes;
  cv::imencode(".png", image, bytes, {cv::IMWRITE_PNG_COMPRESSION, 9});
  return {bytes.begin(), bytes.end()};
}

}  // namespace

/// OUT/ gets the frames by their names, marks.csv, swatches.csv and tape.csv where the scene plans
/// a survey, and OUT/truth/ what only tests may read: truth.json, mask.png and maps of every frame.
Outcome scene_command(const Arguments& arguments, Progress& progress) {
  const std::filesystem::path out = arguments.words.at(1);
  int threads = std::max(1, static_cast<int>(std::thread::hardware_concurrency()));
  if (const auto count = arguments.whole_number("--threads")) {
    if (*count < 1 || *count > 256) {
      throw InputError("--threads", fmt::format("{} must be from 1 to 256", *count));
    }
    threads = *count;
  }
  const scene::Scene scene = scene::read_scene(arguments.words.at(0));
  if (std::filesystem::exists(out) && !std::filesystem::is_directory(out)) {
    throw InputError(out.string(), "is no folder; name the folder that the frames shall go to");
  }

  std::vector<scene::FrameTruth> truths;
  std::size_t bytes = 0;
  for (std::size_t k = 0; k < scene.frames.size(); ++k) {
    progress.at("frames", static_cast<int>(k), static_cast<int>(scene.frames.size()));
    scene::RenderedFrame frame = scene::render(scene, k, threads);
    const bool jpeg = std::filesystem::path(frame.truth.image).extension() == ".jpg";
    const std::string file =
        jpeg ? std::string(frame.jpeg.begin(), frame.jpeg.end()) : png(frame.bgr);
    write_file(out / frame.truth.image, file);
    bytes += file.size();
    const std::filesystem::path truth = out / "truth";
    write_file(truth / scene::map_file(frame.truth.image, "classes"), png(frame.truth.classes));
    write_file(truth / scene::map_file(frame.truth.image, "objects"), png(frame.truth.objects));
    if (k == 0) write_file(truth / "mask.png", png(frame.truth.mask));
    truths.push_back(std::move(frame.truth));
  }
  progress.at("frames", static_cast<int>(truths.size()), static_cast<int>(truths.size()));
  write_file(out / "truth" / "truth.json", scene::truth_json(scene, truths));
  if (scene.survey) {
    const scene::Sheets sheets = scene::survey(scene, truths);
    write_file(out / "marks.csv", sheets.marks_csv);
    write_file(out / "swatches.csv", sheets.swatches_csv);
    write_file(out / "tape.csv", sheets.tape_csv);
  }

  const scene::ImagedRim rim = scene::imaged_rim(scene.rig);
  Outcome outcome;
  outcome.document = {{"scene", scene.name},
                      {"frames", truths.size()},
                      {"lights", scene.lights.size()},
                      {"bytes", bytes},
                      {"centre", {{"u_px", rim.centre.u_px}, {"v_px", rim.centre.v_px}}},
                      {"folder", out.string()}};
  outcome.summary = fmt::format(
      "{}: {} frames of {} x {} px under {} lights, {:.1f} MB, in {}\n"
      "True centre ({:.2f}, {:.2f}) px, rim radius {:.1f} px; truth in {}\n",
      scene.name,
      truths.size(),
      scene.rig.width_px,
      scene.rig.height_px,
      scene.lights.size(),
      static_cast<double>(bytes) * 1e-6,
      out.string(),
      rim.centre.u_px,
      rim.centre.v_px,
      0.5 * (rim.ellipse.a_px + rim.ellipse.b_px),
      (out / "truth" / "truth.json").string());
  return outcome;
}

}  // namespace rondel::app
