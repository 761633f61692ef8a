#pragma once

#include <nlohmann/json.hpp>
#include <string>
#include <vector>

#include "calib/verdict/verdict.h"
#include "tools/rondel/results.h"
#include "tools/rondel/steps/check_batch.h"

namespace rondel::app {

/// Everything check.json, check.csv and check.xml are written from.
struct CheckReport {
  const VenueSpec* venue = nullptr;
  const TapeBatch* batch = nullptr;  ///< only images that were looked at, with their rows
  const FloorMap* curve = nullptr;  ///< tells where the tape's places should appear; none: not told
  std::vector<std::vector<verdict::Find>> finds;
  verdict::Verdict verdict;
  nlohmann::ordered_json causes = nlohmann::ordered_json::array();
  nlohmann::ordered_json hypotheses = nlohmann::ordered_json::array();
  std::string tables_identity;
  bool partial = false;
  int images_in_sheet = 0;
};

/// What `check --json` prints: check.json without its measurements and record.
[[nodiscard]] nlohmann::ordered_json check_document(const CheckReport& report);
/// check.json: the document, a line for each measurement, and the record.
[[nodiscard]] std::string check_json(const CheckReport& report, const MadeFrom& made_from);
/// A row a measurement, in the order of images and of the tape sheet.
[[nodiscard]] std::string check_csv(const CheckReport& report);
/// JUnit's XML: a suite for the tolerances, one for the rows of each light.
[[nodiscard]] std::string check_junit(const CheckReport& report);
/// A few lines for people.
[[nodiscard]] std::string check_summary(const CheckReport& report);

/// What one shard saw, so that shards can be joined to exactly what one run gives.
struct ShardFile {
  Shard shard;
  MadeFrom made_from;
  bool stopped = false;
  std::vector<std::pair<std::string, std::vector<verdict::Find>>> images;  ///< looked at, by name
};
[[nodiscard]] std::string shard_text(const ShardFile& file);
/// InputError naming `name` on anything that is not a shard file.
[[nodiscard]] ShardFile parse_shard(const std::string& text, const std::string& name);

}  // namespace rondel::app
