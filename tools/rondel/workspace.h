#pragma once

#include <filesystem>
#include <map>
#include <memory>
#include <optional>
#include <string>
#include <vector>

#include "calib/base/problem.h"
#include "calib/venue/spec.h"

namespace rondel::app {

/// A frame on disk, not yet read.
struct FrameFile {
  std::string image;  ///< relative to the venue folder, "frames/noon/0001.png"
  std::string light;  ///< "" for images directly in frames/
  std::filesystem::path path;
};

class HashStore;  // content hashes of files that have not changed since; results.cc

/// A venue folder, read and validated: everything people wrote, nothing computed. Reading reports
/// every problem of every file at once (InputError). Missing CSV files are empty lists.
struct Workspace {
  std::filesystem::path folder;
  VenueSpec venue;
  RigSpec rig;
  std::vector<FrameFile> frames;  ///< sorted by name
  std::vector<Mark> marks;
  std::vector<Swatch> swatches;
  std::vector<Stroke> strokes;
  std::vector<TapeRow> tape;
  std::shared_ptr<HashStore> hashes;  ///< shared by copies; never null after open_workspace

  [[nodiscard]] std::filesystem::path results() const { return folder / "results"; }
};

[[nodiscard]] Workspace open_workspace(const std::filesystem::path& folder);

/// Another folder's frames/ and tape.csv, to be held against a venue (`check --batch`). Its own
/// venue.yaml, where there is one, is not read. Image names are relative to that folder.
struct Batch {
  std::filesystem::path folder;
  std::vector<FrameFile> frames;
  std::vector<TapeRow> tape;
};
[[nodiscard]] Batch open_batch(const Workspace& workspace, const std::filesystem::path& folder);

/// The images in `folder`/frames, sorted by name; sub-folders name lights. Adds a problem for each
/// folder that is nested deeper.
[[nodiscard]] std::vector<FrameFile> list_frames(const std::filesystem::path& folder,
                                                 std::vector<Problem>& problems);

}  // namespace rondel::app
