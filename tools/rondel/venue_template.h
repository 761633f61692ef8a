#pragma once

#include <optional>
#include <string>
#include <string_view>

namespace rondel::app {

/// A rig.yaml with every key explained; valid as it is.
[[nodiscard]] std::string rig_template();

/// A venue.yaml with every key explained; valid as it is.
[[nodiscard]] std::string venue_template(std::string_view name);

/// Another venue's venue.yaml under a new name: objects, link, budget and tolerances stay as they
/// were written; a `centre:` given by hand stays too, since the mirror is the same; `lights:` goes,
/// since they belong to the other hall.
[[nodiscard]] std::string venue_from(std::string_view other_text,
                                     std::string_view name,
                                     std::string_view other_folder);

/// The file that a rig.yaml's mirror names as `points_file`.
[[nodiscard]] std::optional<std::string> points_file_of(std::string_view rig_text);

/// `text` as a YAML scalar in double quotes.
[[nodiscard]] std::string yaml_quoted(std::string_view text);

}  // namespace rondel::app
