// Classifying and labelling a 320 x 240 frame for three objects: through the class table, against
// the image library's conversion, ranges and labelling, and against a loop that only reads one
// table entry a pixel.
#include <fmt/format.h>

#include <algorithm>
#include <chrono>
#include <functional>
#include <opencv2/imgproc.hpp>

#include "calib/colour/class_table.h"
#include "vision/detect/detect.h"
#include "vision/scene/render.h"

namespace {

using namespace rondel;

/// Seconds of the fastest of several runs: what the code costs when nothing else disturbs it.
double fastest_s(const std::function<void()>& work) {
  double best = 1e9;
  for (int k = 0; k < 400; ++k) {
    const auto start = std::chrono::steady_clock::now();
    work();
    best = std::min(
        best, std::chrono::duration<double>(std::chrono::steady_clock::now() - start).count());
  }
  return best;
}

}  // namespace

int main() {
  cv::setNumThreads(1);
  const scene::Scene scene = scene::practice_scene({}, 4, 1);
  const scene::RenderedFrame frame = scene::render(scene, 0, 2);
  const std::vector<colour::ThresholdSet> sets = {
      {"buoy", {{{172, 16}, {130, 255}, {60, 255}}}},
      {"dock_teal", {{{78, 98}, {110, 255}, {35, 255}}}},
      {"dock_violet", {{{122, 160}, {60, 255}, {40, 255}}}}};
  vision::DetectorSetup setup;
  setup.table = colour::make_class_table(sets);
  setup.mask = frame.truth.mask;
  setup.objects.resize(3);
  setup.centre = frame.truth.rim.centre;
  const cv::Mat& bgr = frame.bgr;

  volatile unsigned sink = 0;
  const double detect_s =
      fastest_s([&] { sink = static_cast<unsigned>(vision::detect(setup, bgr).size()); });
  cv::Mat hsv;
  cv::Mat in;
  cv::Mat labels;
  cv::Mat stats;
  cv::Mat centroids;
  const double library_s = fastest_s([&] {
    cv::cvtColor(bgr, hsv, cv::COLOR_BGR2HSV);
    for (const colour::ThresholdSet& set : sets) {
      const colour::HsvBox& box = set.boxes[0];
      cv::inRange(hsv,
                  cv::Scalar(box.h.from > box.h.to ? 0 : box.h.from, box.s[0], box.v[0]),
                  cv::Scalar(box.h.to, box.s[1], box.v[1]),
                  in);
      in &= setup.mask;
      sink =
          static_cast<unsigned>(cv::connectedComponentsWithStats(in, labels, stats, centroids, 8));
    }
  });
  const double reading_s = fastest_s([&] {
    unsigned sum = 0;
    for (int v = 0; v < bgr.rows; ++v) {
      const auto* p = bgr.ptr<unsigned char>(v);
      for (int u = 0; u < bgr.cols; ++u, p += 3) sum += setup.table.at(p[2], p[1], p[0]);
    }
    sink = sum;
  });
  fmt::print("{} x {}, {} blobs\n", bgr.cols, bgr.rows, vision::detect(setup, bgr).size());
  fmt::print("table and labels      {:7.1f} us\n", 1e6 * detect_s);
  fmt::print("library, three passes {:7.1f} us: {:.1f} x as long\n",
             1e6 * library_s,
             library_s / detect_s);
  fmt::print("only reading a table  {:7.1f} us: labels take {:.2f} x that\n",
             1e6 * reading_s,
             detect_s / reading_s);
}
