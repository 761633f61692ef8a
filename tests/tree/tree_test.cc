// What holds for the tree as a whole: the direction of includes, the top level, and that every
// source has its room in the map of DEVELOPERS.md.
#include <gtest/gtest.h>

#include <algorithm>
#include <array>
#include <filesystem>
#include <fstream>
#include <set>
#include <sstream>
#include <string>
#include <vector>

namespace {

namespace fs = std::filesystem;

const fs::path kRoot = RONDEL_SOURCE_DIR;

std::vector<fs::path> sources(const fs::path& room) {
  std::vector<fs::path> found;
  for (const auto& entry : fs::recursive_directory_iterator(kRoot / room)) {
    const std::string extension = entry.path().extension().string();
    if (extension == ".h" || extension == ".cc") found.push_back(entry.path());
  }
  std::sort(found.begin(), found.end());
  return found;
}

std::string text_of(const fs::path& path) {
  std::ifstream in(path);
  std::ostringstream out;
  out << in.rdbuf();
  return out.str();
}

/// Lines of `room`'s sources that include something starting with one of `prefixes`.
std::vector<std::string> includes_of(const fs::path& room,
                                     const std::vector<std::string>& prefixes) {
  std::vector<std::string> hits;
  for (const fs::path& path : sources(room)) {
    std::istringstream in(text_of(path));
    for (std::string line; std::getline(in, line);) {
      for (const std::string& prefix : prefixes) {
        if (line.rfind("#include " + prefix, 0) == 0) {
          hits.push_back(fs::relative(path, kRoot).string() + ": " + line);
        }
      }
    }
  }
  return hits;
}

TEST(Tree, IncludesPointDownwardsOnly) {
  EXPECT_EQ(includes_of("calib", {"\"vision/", "\"tools/", "\"tests/", "<opencv2/"}),
            std::vector<std::string>{});
  EXPECT_EQ(includes_of("vision", {"\"tools/", "\"tests/"}), std::vector<std::string>{});
  EXPECT_EQ(includes_of("tools", {"\"tests/"}), std::vector<std::string>{});
}

TEST(Tree, TheCheckOfIncludesSeesWhatIsThere) {
  EXPECT_FALSE(includes_of("vision", {"\"calib/"}).empty());
}

TEST(Tree, RenderedTruthSharesNoFormulaWithTheOptics) {
  EXPECT_EQ(includes_of("vision/scene", {"\"calib/optics", "\"calib/range"}),
            std::vector<std::string>{});
}

TEST(Tree, EveryRoomIsOnTheMap) {
  const std::string map = text_of(kRoot / "DEVELOPERS.md");
  std::set<std::string> rooms;
  for (const char* top : {"calib", "vision", "tools"}) {
    for (const fs::path& path : sources(top)) {
      const fs::path relative = fs::relative(path, kRoot);
      auto part = relative.begin();
      const std::string first = part->string();
      rooms.insert(first + "/" + (++part)->string());
    }
  }
  for (const std::string& room : rooms) {
    EXPECT_NE(map.find('`' + room + '`'), std::string::npos) << room << " is not in DEVELOPERS.md";
  }
}

}  // namespace
