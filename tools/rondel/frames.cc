#include "tools/rondel/frames.h"

#include <vector>

namespace rondel::app {

vision::LoadedFrames load_frames(std::span<const FrameFile> files,
                                 const CameraSpec& camera,
                                 Progress& progress) {
  std::vector<vision::FrameToLoad> wanted;
  wanted.reserve(files.size());
  for (const FrameFile& file : files) wanted.push_back({file.image, file.light, file.path});
  return vision::load_frames(wanted, camera, progress);
}

vision::LoadedFrames load_frames(const Workspace& workspace, Progress& progress) {
  return load_frames(workspace.frames, workspace.rig.camera, progress);
}

}  // namespace rondel::app
