#pragma once

#include <span>
#include <string>

#include "tools/rondel/workspace.h"
#include "vision/frames/load.h"

namespace rondel::app {

/// Loads a venue's frames in parallel. Bad ones are left out and named in `left_out`.
[[nodiscard]] vision::LoadedFrames load_frames(const Workspace& workspace, Progress& progress);

/// The same for any list of frame files, of the rig's size.
[[nodiscard]] vision::LoadedFrames load_frames(std::span<const FrameFile> files,
                                               const CameraSpec& camera,
                                               Progress& progress);

}  // namespace rondel::app
