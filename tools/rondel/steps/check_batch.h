#pragma once

#include <filesystem>
#include <string>
#include <vector>

#include "calib/base/floor_map.h"
#include "calib/base/progress.h"
#include "calib/link/board_tables.h"
#include "calib/verdict/verdict.h"
#include "tools/rondel/workspace.h"
#include "vision/detect/detect.h"

namespace rondel::app {

/// Images and tape sheet of one check, sorted so that the result does not depend on the sheet's
/// order of images: images by name, rows of an image in the sheet's order.
struct TapeBatch {
  std::vector<verdict::ImageEntry> images;
  std::vector<std::filesystem::path> paths;  ///< of the images
  std::vector<verdict::TapeEntry> tape;
  std::string sheet = "tape.csv";  ///< the sheet's name in messages
};

/// More rows than this are refused: an archive this large belongs in several sheets.
inline constexpr std::size_t kMostTapeRows = 200000;

/// The images that `tape` names. InputError, all at once, naming line by line: an empty sheet, too
/// many rows, images that do not exist, rows listed twice, objects both absent and present.
[[nodiscard]] TapeBatch make_batch(const VenueSpec& venue,
                                   const std::vector<FrameFile>& frames,
                                   const std::vector<TapeRow>& tape,
                                   const std::string& sheet);

/// What a board needs to answer, and what is needed beside it to say where its errors come from.
struct Examiner {
  vision::DetectorSetup detector;
  const link::BoardTables* tables = nullptr;
  const FloorMap* curve = nullptr;  ///< none: errors are not split
  CameraSpec camera;
  double pixel_noise = 0.3;  ///< one standard deviation of a blob's place, px
};

/// Fills in what the boards make of a blob at `find.measured`: codes, and their meaning.
void report_find(const link::BoardTables& tables, verdict::Find& find);

/// Marks rows whose place is behind the mask or out of sight.
void mark_hidden(const Examiner& examiner, const VenueSpec& venue, TapeBatch& batch);

/// Which images to look at: those whose index is `index` modulo `count`.
struct Shard {
  int index = 0;
  int count = 1;
};

struct Examined {
  std::vector<std::vector<verdict::Find>> finds;  ///< per image of the batch
  std::vector<char> done;                         ///< per image: looked at
  int images_done = 0;
  bool stopped = false;  ///< asked to stop before all of the shard was done
};

/// Looks at every image of the shard on all cores, as the boards would. Each core holds one image
/// at a time. Unreadable images are reported together (InputError, by tape line).
[[nodiscard]] Examined examine(const Examiner& examiner,
                               const TapeBatch& batch,
                               Shard shard,
                               Progress& progress);

}  // namespace rondel::app
