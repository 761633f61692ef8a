#include <fmt/format.h>

#include <algorithm>

#include "calib/venue/read_yaml.h"
#include "calib/venue/words.h"
#include "calib/venue/yaml_map.h"

namespace rondel {
namespace {

constexpr std::size_t kMostObjects = 32;

bool is_letter(char c) { return (c >= 'a' && c <= 'z') || (c >= 'A' && c <= 'Z') || c == '_'; }

/// A name that may stand in emitted C and Python code.
bool is_identifier(const std::string& word) {
  if (word.empty() || word.size() > 32 || !is_letter(word.front())) return false;
  return std::all_of(
      word.begin(), word.end(), [](char c) { return is_letter(c) || (c >= '0' && c <= '9'); });
}

ObjectSpec read_object(const YamlMap& objects, const std::string& name) {
  ObjectSpec object;
  object.name = name;
  if (name == kSurroundings) {
    objects.complain(name, "this name stands for all that is no object; choose another");
  } else if (!is_identifier(name)) {
    objects.complain(name,
                     "a name is a letter, then letters, digits and '_', at most 32; it stands in "
                     "the boards' code");
  }
  const auto map = objects.map(name);
  if (!map) return object;
  map->allow({"shape", "diameter_mm", "width_mm", "height_mm"});
  const auto shape = map->require("shape", "write ball, box or post")
                         ? map->word("shape", {"ball", "box", "post"})
                         : std::nullopt;
  object.shape = static_cast<Shape>(shape.value_or(0));
  const Limits size_mm = {0.0, 5000.0, true};
  if (object.shape == Shape::ball) {
    if (shape && map->has("width_mm")) {
      map->complain("width_mm", "is for boxes and posts; a ball has its diameter_mm");
    }
    if (map->has("diameter_mm")) {
      object.diameter_m = map->number("diameter_mm", size_mm).value_or(0.0) / 1000.0;
    } else if (shape) {
      (void)map->require("diameter_mm", "a ball is seen at the height of its radius");
    }
  } else {
    if (map->has("diameter_mm") && map->has("width_mm")) {
      map->complain("width_mm", "and diameter_mm say the same; keep one");
    }
    const char* key = map->has("diameter_mm") ? "diameter_mm" : "width_mm";
    object.diameter_m = map->number(key, size_mm).value_or(0.0) / 1000.0;
  }
  if (const auto height_mm = map->number("height_mm", {0.0, 5000.0, false})) {
    object.height_m = *height_mm / 1000.0;
  }
  return object;
}

std::vector<ObjectSpec> read_objects(const YamlMap& top) {
  std::vector<ObjectSpec> objects;
  const auto map = top.map("objects");
  if (!map) return objects;
  for (const std::string& name : map->keys()) objects.push_back(read_object(*map, name));
  if (objects.size() > kMostObjects) {
    map->complain(
        fmt::format("{} objects; a board's table holds at most {}", objects.size(), kMostObjects));
  }
  return objects;
}

std::vector<std::pair<std::string, std::string>> read_lights(const YamlMap& top) {
  std::vector<std::pair<std::string, std::string>> lights;
  const auto map = top.map("lights");
  if (!map) return lights;
  for (const std::string& name : map->keys()) {
    lights.emplace_back(name, map->text(name).value_or(""));
  }
  return lights;
}

LinkSpec read_link(const YamlMap& top) {
  LinkSpec link;
  const auto map = top.map("link");
  if (!map) return link;
  map->allow({"baud",
              "reports_per_second",
              "bearing_codes",
              "range_bits",
              "near_m",
              "far_m",
              "check_byte",
              "measure"});
  link.baud = map->whole("baud", 300, 10000000).value_or(link.baud);
  link.reports_per_second =
      map->number("reports_per_second", {0.0, 10000.0, true}).value_or(link.reports_per_second);
  link.bearing_codes = map->whole("bearing_codes", 4, 16384).value_or(link.bearing_codes);
  link.range_bits = map->whole("range_bits", 3, 14).value_or(link.range_bits);
  link.near_m = map->number("near_m", {0.0, 100.0, true}).value_or(link.near_m);
  link.far_m = map->number("far_m", {0.0, 1000.0, true}).value_or(link.far_m);
  if (!(link.near_m < link.far_m)) {
    map->complain(
        map->has("far_m") ? "far_m" : "near_m",
        fmt::format("near_m must be below far_m ({} and {} now)", link.near_m, link.far_m));
  }
  switch (map->word("check_byte", {"true", "sum7", "crc8", "false"}).value_or(0)) {
    case 2:
      link.check = CheckByte::crc8;
      break;
    case 3:
      link.check = CheckByte::none;
      break;
    default:
      break;
  }
  link.measure = static_cast<CodebookMeasure>(
      map->word("measure", {"relative", "absolute", "rms", "noise_matched"}).value_or(0));
  return link;
}

BudgetSpec read_budget(const YamlMap& top) {
  BudgetSpec budget;
  const auto map = top.map("budget");
  if (!map) return budget;
  map->allow({"table_bytes", "colour_bytes"});
  budget.table_bytes = map->whole("table_bytes", 16, 16777216).value_or(budget.table_bytes);
  budget.colour_bytes = map->whole("colour_bytes", 16, 16777216).value_or(budget.colour_bytes);
  return budget;
}

ToleranceSpec read_tolerance(const YamlMap& top) {
  ToleranceSpec tolerance;
  const auto map = top.map("tolerance");
  if (!map) return tolerance;
  map->allow({"range_relative", "range_floor_mm", "bearing_deg", "recall"});
  tolerance.range_relative =
      map->number("range_relative", {0.0, 1.0, true}).value_or(tolerance.range_relative);
  if (const auto floor_mm = map->number("range_floor_mm", {0.0, 10000.0, false})) {
    tolerance.range_floor_m = *floor_mm / 1000.0;
  }
  if (const auto bearing_deg = map->number("bearing_deg", {0.0, 180.0, true})) {
    tolerance.bearing_rad = *bearing_deg * kRadPerDeg;
  }
  tolerance.recall = map->number("recall", {0.0, 1.0, true}).value_or(tolerance.recall);
  return tolerance;
}

NoiseSpec read_noise(const YamlMap& top) {
  NoiseSpec noise;
  const auto map = top.map("noise");
  if (!map) return noise;
  map->allow({"mark_px", "tape_m"});
  noise.mark_px = map->number("mark_px", {0.0, 50.0, true}).value_or(noise.mark_px);
  noise.tape_m = map->number("tape_m", {0.0, 1.0, true}).value_or(noise.tape_m);
  return noise;
}

LightingSpec read_lighting(const YamlMap& top) {
  LightingSpec lighting;
  const auto map = top.map("lighting");
  if (!map) return lighting;
  map->allow({"stops", "kelvin", "auto_white_balance"});
  lighting.stops = map->pair("stops", {-6.0, 6.0, false}).value_or(lighting.stops);
  lighting.kelvin = map->pair("kelvin", {1667.0, 25000.0, false}).value_or(lighting.kelvin);
  lighting.auto_white_balance =
      map->yes_or_no("auto_white_balance").value_or(lighting.auto_white_balance);
  return lighting;
}

std::optional<CentreOverride> read_centre_override(const YamlMap& top) {
  const auto map = top.map("centre");
  if (!map) return std::nullopt;
  map->allow({"u_px", "v_px", "sd_px"});
  const bool has_u = map->require("u_px", "write both u_px and v_px");
  const bool has_v = map->require("v_px", "write both u_px and v_px");
  const Limits in_image = {-0.5, 20000.0, false};
  const auto u_px = map->number("u_px", in_image);
  const auto v_px = map->number("v_px", in_image);
  const double sd_px = map->number("sd_px", {0.0, 100.0, true}).value_or(0.2);
  if (!has_u || !has_v || !u_px || !v_px) return std::nullopt;
  return CentreOverride{{*u_px, *v_px}, sd_px};
}

}  // namespace

VenueSpec read_venue(std::string_view text,
                     const std::string& file,
                     std::vector<Problem>& problems) {
  const YamlMap top(text, file, problems);
  top.allow({"name",
             "objects",
             "lights",
             "link",
             "budget",
             "tolerance",
             "noise",
             "lighting",
             "hsv_scale",
             "prefix",
             "false_positive_cap",
             "centre"});
  VenueSpec venue;
  venue.name = top.text("name").value_or("");
  venue.objects = read_objects(top);
  venue.lights = read_lights(top);
  venue.link = read_link(top);
  venue.budget = read_budget(top);
  venue.tolerance = read_tolerance(top);
  venue.noise = read_noise(top);
  venue.lighting = read_lighting(top);
  venue.hsv_scale = static_cast<HsvScale>(
      top.word("hsv_scale", {"opencv", "full_byte", "degrees_percent"}).value_or(0));
  if (const auto prefix = top.text("prefix")) {
    if (is_identifier(*prefix)) {
      venue.prefix = *prefix;
    } else {
      top.complain("prefix", "must be a letter, then letters, digits and '_', at most 32");
    }
  }
  venue.false_positive_cap =
      top.number("false_positive_cap", {0.0, 0.5, true}).value_or(venue.false_positive_cap);
  venue.centre = read_centre_override(top);
  return venue;
}

}  // namespace rondel
