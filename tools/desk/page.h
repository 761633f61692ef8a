#pragma once

#include <span>
#include <string_view>

namespace rondel::desk {

/// A file of the page as built into the program.
struct PageFile {
  std::string_view name;  ///< "desk.js"
  std::string_view bytes;
};
/// Everything in tools/desk/page, by name.
[[nodiscard]] std::span<const PageFile> page_files();

}  // namespace rondel::desk
