#pragma once

#include <opencv2/core.hpp>
#include <string>
#include <vector>

#include "calib/base/floor_map.h"
#include "calib/colour/class_table.h"
#include "calib/venue/spec.h"

namespace rondel::vision {

/// One connected patch of one object's colour.
struct Blob {
  int object = 0;  ///< index into the venue's objects
  /// Of the blob with its border: pixels there count by how much of the object they show (the mix
  /// of the blob's and the background's colour in linear light).
  ImagePoint centroid;
  ImagePoint plain_centroid;  ///< of the blob's pixels, all alike
  ImagePoint measured;  ///< what stands for the object: centroid of a ball, foot of a box, ...
  int area_px = 0;
  cv::Rect box;
  bool cut_by_mask = false;  ///< touches the mask's edge, so its centroid is biased
};

/// What a detector needs, fixed for a whole batch. Immutable; use from many threads.
struct DetectorSetup {
  colour::ClassTable table;
  cv::Mat mask;                     ///< CV_8U, 255 may show floor; same size as the frames
  std::vector<ObjectSpec> objects;  ///< class k is objects[k - 1]
  ImagePoint centre;                ///< for 'inner edge along its bearing'
  const FloorMap* map = nullptr;    ///< for the size gate; none: only the least area counts
  int least_area_px = 6;
};

/// All accepted blobs, largest first within each object.
[[nodiscard]] std::vector<Blob> detect(const DetectorSetup& setup, const cv::Mat& bgr);

}  // namespace rondel::vision
