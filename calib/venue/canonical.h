#pragma once

#include <string>

#include "calib/venue/spec.h"

namespace rondel {

// What was read, written again in one fixed way: the same values give the same text whatever the
// file's comments, order and spelling of numbers. For content hashes, not for people.
[[nodiscard]] std::string canonical_camera(const RigSpec& rig);
[[nodiscard]] std::string canonical_rig(const RigSpec& rig);
[[nodiscard]] std::string canonical_objects(const VenueSpec& venue);
[[nodiscard]] std::string canonical_link(const VenueSpec& venue);
[[nodiscard]] std::string canonical_budget(const VenueSpec& venue);
[[nodiscard]] std::string canonical_tolerance(const VenueSpec& venue);
[[nodiscard]] std::string canonical_noise(const VenueSpec& venue);
[[nodiscard]] std::string canonical_lighting(const VenueSpec& venue);
[[nodiscard]] std::string canonical_centre(const VenueSpec& venue);  ///< "" when there is none

}  // namespace rondel
