#include "tools/rondel/board.h"

#include <fmt/format.h>

#include <filesystem>
#include <system_error>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "calib/range/curve_file.h"

namespace rondel::app {
namespace {

void need(const std::filesystem::path& path, const char* step, std::vector<Problem>& problems) {
  std::error_code error;
  if (std::filesystem::is_regular_file(path, error)) return;
  problems.push_back({path.string(), fmt::format("is missing; run 'rondel {}' first", step)});
}

cv::Mat mask_from(const link::BoardTables& tables) {
  const cv::Size size{tables.width_px, tables.height_px};
  if (tables.mask.empty()) return {size, CV_8U, cv::Scalar(255)};
  cv::Mat mask(size, CV_8U, cv::Scalar(0));
  for (const link::MaskRun& run : tables.mask) {
    mask.row(run.row).colRange(run.from, run.to) = 255;
  }
  return mask;
}

}  // namespace

Board open_board(const Workspace& workspace) {
  const std::filesystem::path file =
      workspace.results() / "tables" / (workspace.venue.prefix + ".bin");
  const std::filesystem::path range = workspace.results() / "range.yaml";
  std::vector<Problem> problems;
  need(range, "range", problems);
  need(file, "tables", problems);
  if (!problems.empty()) throw InputError(std::move(problems));

  Board board;
  const std::string bytes = read_file(file);
  board.tables = link::unpack({reinterpret_cast<const std::uint8_t*>(bytes.data()), bytes.size()},
                              file.string());
  const link::BoardTables& tables = board.tables;
  const CameraSpec& camera = workspace.rig.camera;
  const auto refuse = [&](const std::string& what) {
    problems.push_back({file.string(), what + "; run 'rondel tables' again"});
  };
  if (tables.classes.classes.empty()) {
    refuse("carries no colours: run 'rondel colours' first");
  }
  if (tables.width_px != camera.width_px || tables.height_px != camera.height_px) {
    refuse(fmt::format("was made for images of {} x {} px, not {} x {}",
                       tables.width_px,
                       tables.height_px,
                       camera.width_px,
                       camera.height_px));
  }
  bool same = tables.objects.size() == workspace.venue.objects.size();
  for (std::size_t o = 0; same && o < tables.objects.size(); ++o) {
    same = tables.objects[o].name == workspace.venue.objects[o].name;
  }
  if (!same) refuse("was made for other objects than those of venue.yaml");
  if (!problems.empty()) throw InputError(std::move(problems));

  board.curve = range::read_range_curve(range);
  board.detector.table = tables.classes;
  board.detector.mask = mask_from(tables);
  board.detector.objects = workspace.venue.objects;
  board.detector.centre = board.curve->centre();
  board.detector.map = board.curve.get();
  return board;
}

}  // namespace rondel::app
