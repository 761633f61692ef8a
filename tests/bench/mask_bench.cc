#include <fmt/core.h>

#include <algorithm>
#include <chrono>
#include <cstdlib>
#include <opencv2/imgcodecs.hpp>
#include <vector>

#include "tests/vision/mask/mask_score.h"
#include "tests/vision/rim/rim_trials.h"
#include "vision/mask/find_mask.h"

// Mask from 4, 10 and 30 frames of rigs drawn at random; time against decoding the same frames.
//   bench_mask_bench [rigs] [most frames]

namespace {

using namespace rondel;
using Clock = std::chrono::steady_clock;

double seconds_since(Clock::time_point start) {
  return std::chrono::duration<double>(Clock::now() - start).count();
}

}  // namespace

int main(int argc, char** argv) {
  const unsigned rigs = argc > 1 ? static_cast<unsigned>(std::atoi(argv[1])) : 60;
  const int most = argc > 2 ? std::atoi(argv[2]) : 30;
  fmt::print(
      "hidden region inside the rim     (reach: 10 frames 0.985 median, 0.97 worst; 4 frames 0.95, "
      "30 frames 0.99 median; floor masked 0.5 %)\n");
  fmt::print("{:<8}{:>6}{:>9}{:>10}{:>10}{:>12}{:>16}{:>14}\n",
             "frames",
             "rigs",
             "refused",
             "median",
             "worst",
             "with seam",
             "floor masked",
             "time/decode");
  for (const int count : {4, 10, 30}) {
    if (count > most) continue;
    std::vector<double> ious;
    std::vector<double> seams;
    std::vector<double> floors;
    int refused = 0;
    double spent = 0.0;
    double decoding = 0.0;
    for (unsigned index = 0; index < rigs; ++index) {
      const trials::Trial trial = trials::make_trial(index, count);
      std::vector<Frame> frames;
      scene::FrameTruth truth;
      std::vector<std::vector<std::uint8_t>> files;
      for (std::size_t k = 0; k < trial.scene.frames.size(); ++k) {
        scene::RenderedFrame frame = trials::render_trial(trial, k, 2);
        frames.push_back({"", "", frame.bgr});
        cv::imencode(".png", frame.bgr, files.emplace_back());
        truth = frame.truth;
      }
      const auto start_decoding = Clock::now();
      for (const auto& file : files) {
        if (cv::imdecode(file, cv::IMREAD_COLOR).empty()) return 1;
      }
      decoding += seconds_since(start_decoding);
      const auto start = Clock::now();
      const auto found = vision::find_mask(frames, truth.rim.centre, truth.rim.ellipse);
      spent += seconds_since(start);
      if (found.refusal != vision::MaskRefusal::none) {
        ++refused;
        continue;
      }
      const trials::MaskScore score = trials::score_mask(found.mask, truth.mask, truth.rim);
      ious.push_back(score.iou);
      seams.push_back(score.iou_with_seam);
      floors.push_back(score.floor_masked);
    }
    if (ious.empty()) continue;
    std::sort(ious.begin(), ious.end());
    std::sort(seams.begin(), seams.end());
    fmt::print("{:<8}{:>6}{:>9}{:>10.4f}{:>10.4f}{:>12.4f}{:>14.2f} %{:>14.1f}\n",
               count,
               ious.size(),
               refused,
               ious[ious.size() / 2],
               ious.front(),
               seams[seams.size() / 2],
               100.0 * *std::max_element(floors.begin(), floors.end()),
               spent / decoding);
  }
}
