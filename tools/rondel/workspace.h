#pragma once

#include <filesystem>
#include <map>
#include <optional>
#include <string>
#include <vector>

#include "calib/venue/spec.h"

namespace rondel::app {

/// A frame on disk, not yet read.
struct FrameFile {
  std::string image;  ///< relative to the venue folder, "frames/noon/0001.png"
  std::string light;  ///< "" for images directly in frames/
  std::filesystem::path path;
};

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

  [[nodiscard]] std::filesystem::path results() const { return folder / "results"; }
};

[[nodiscard]] Workspace open_workspace(const std::filesystem::path& folder);

}  // namespace rondel::app
