#pragma once

#include <functional>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "calib/base/problem.h"
#include "calib/venue/spec.h"

namespace rondel {

/// What a venue's CSV files are held against.
struct SheetContext {
  const VenueSpec& venue;
  const CameraSpec& camera;  ///< a size of 0: not known, positions are not checked
  /// What is wrong with an image's name ("there is no such image"), nothing when it exists.
  std::function<std::optional<std::string>(const std::string& image)> trouble_with;
};

// All readers: the header's columns in any order, further column 'note' for people; all problems
// are added with file and line, rows with problems are left out. `file` is how problems name the
// file.

/// image,u_px,v_px,object,range_m,bearing_deg. Range above 0 to 100 m; bearing within 360 degrees,
/// wrapped.
[[nodiscard]] std::vector<Mark> read_marks(std::string_view text,
                                           const std::string& file,
                                           const SheetContext& context,
                                           std::vector<Problem>& problems);

/// image,label,shape,points. Shapes: disc 'u v radius', box 'u0 v0 u1 v1' (any two opposite
/// corners), polygon 'u0 v0 u1 v1 u2 v2 ...', grow 'u v'.
[[nodiscard]] std::vector<Swatch> read_swatches(std::string_view text,
                                                const std::string& file,
                                                const SheetContext& context,
                                                std::vector<Problem>& problems);

/// kind,width_px,points: kind hide or show; points 'u0 v0 u1 v1 ...', at least one.
[[nodiscard]] std::vector<Stroke> read_strokes(std::string_view text,
                                               const std::string& file,
                                               const SheetContext& context,
                                               std::vector<Problem>& problems);

/// image,object,range_m,bearing_deg. An empty range says that the object is not in the image.
[[nodiscard]] std::vector<TapeRow> read_tape(std::string_view text,
                                             const std::string& file,
                                             const SheetContext& context,
                                             std::vector<Problem>& problems);

// The same files as text again; reading it back gives the same rows.
[[nodiscard]] std::string marks_csv(const std::vector<Mark>& marks);
[[nodiscard]] std::string swatches_csv(const std::vector<Swatch>& swatches);
[[nodiscard]] std::string strokes_csv(const std::vector<Stroke>& strokes);
[[nodiscard]] std::string tape_csv(const std::vector<TapeRow>& tape);

}  // namespace rondel
