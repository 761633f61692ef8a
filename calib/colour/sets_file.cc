#include "calib/colour/sets_file.h"

#include <fmt/format.h>
#include <yaml-cpp/yaml.h>

#include "calib/base/file.h"
#include "calib/base/problem.h"

namespace rondel::colour {
namespace {

std::string quoted(const std::string& text) {
  std::string out = "\"";
  for (const char c : text) {
    if (c == '"' || c == '\\') out += '\\';
    out += c;
  }
  return out + '"';
}

std::string range_text(const std::optional<std::array<double, 2>>& range) {
  return range ? fmt::format("[{}, {}]", number_text((*range)[0]), number_text((*range)[1]))
               : "null";
}

std::string recalls_text(const std::vector<std::pair<std::string, double>>& recalls) {
  std::string out;
  for (const auto& [light, recall] : recalls) {
    out += fmt::format("{}{}: {}", out.empty() ? "" : ", ", quoted(light), number_text(recall));
  }
  return "{" + out + "}";
}

[[noreturn]] void refuse(const std::filesystem::path& path,
                         const YAML::Node& node,
                         const std::string& what) {
  const int line = node.IsDefined() && !node.Mark().is_null() ? node.Mark().line + 1 : 0;
  throw InputError(line > 0 ? fmt::format("{}:{}", path.string(), line) : path.string(),
                   what + "; run 'rondel colours' again");
}

std::array<int, 2> read_edges(const std::filesystem::path& path,
                              const YAML::Node& node,
                              int most,
                              bool may_wrap) {
  if (!node.IsSequence() || node.size() != 2)
    refuse(path, node, "an edge pair [low, high] was expected");
  const std::array<int, 2> edges = {node[0].as<int>(), node[1].as<int>()};
  for (const int edge : edges) {
    if (edge < 0 || edge > most) {
      refuse(path, node, fmt::format("{} is not from 0 to {}", edge, most));
    }
  }
  if (!may_wrap && edges[0] > edges[1]) refuse(path, node, "the low edge is above the high one");
  return edges;
}

std::optional<std::array<double, 2>> read_range(const YAML::Node& node) {
  if (!node.IsDefined() || node.IsNull()) return std::nullopt;
  return std::array<double, 2>{node[0].as<double>(), node[1].as<double>()};
}

std::vector<std::pair<std::string, double>> read_recalls(const YAML::Node& node) {
  std::vector<std::pair<std::string, double>> recalls;
  for (const auto& entry : node) {
    recalls.emplace_back(entry.first.as<std::string>(), entry.second.as<double>());
  }
  return recalls;
}

ChosenSet read_set(const std::filesystem::path& path,
                   const std::string& name,
                   const YAML::Node& node) {
  ChosenSet chosen;
  chosen.set.object = name;
  if (!node["boxes"].IsSequence()) refuse(path, node, fmt::format("object {}: no boxes", name));
  for (const YAML::Node& box : node["boxes"]) {
    const auto h = read_edges(path, box["h"], 179, true);
    chosen.set.boxes.push_back({{h[0], h[1]},
                                read_edges(path, box["s"], 255, false),
                                read_edges(path, box["v"], 255, false)});
  }
  chosen.recall_by_light = read_recalls(node["recall_by_light"]);
  chosen.recall_as_captured = read_recalls(node["recall_as_captured"]);
  chosen.worst_light = node["worst_light"].as<std::string>("");
  chosen.worst_change = node["worst_change"].as<std::string>("");
  chosen.false_positive_rate = node["false_positive_rate"].as<double>(0.0);
  chosen.score = node["score"].as<double>(0.0);
  chosen.bound = node["bound"].as<double>(1.0);
  chosen.gap = node["gap"].as<double>(0.0);
  if (const YAML::Node envelope = node["envelope"]; envelope.IsMap()) {
    chosen.envelope.stops = read_range(envelope["stops"]);
    chosen.envelope.kelvin = read_range(envelope["kelvin"]);
    const YAML::Node broken = envelope["broken_by"];
    for (std::size_t k = 0; broken.IsSequence() && k < 4 && k < broken.size(); ++k) {
      chosen.envelope.broken_by[k] = broken[k].as<std::string>();
    }
  }
  return chosen;
}

}  // namespace

std::string sets_yaml(const std::vector<ChosenSet>& sets) {
  std::string out = "scale: opencv  # h 0-179, s and v 0-255; h may pass 0\nobjects:";
  if (sets.empty()) out += " {}";
  out += '\n';
  for (const ChosenSet& chosen : sets) {
    out += fmt::format("  {}:\n    boxes:", chosen.set.object);
    if (chosen.set.boxes.empty()) out += " []";
    out += '\n';
    for (const HsvBox& box : chosen.set.boxes) {
      out += fmt::format("      - {{h: [{}, {}], s: [{}, {}], v: [{}, {}]}}\n",
                         box.h.from,
                         box.h.to,
                         box.s[0],
                         box.s[1],
                         box.v[0],
                         box.v[1]);
    }
    out += fmt::format("    recall_by_light: {}\n", recalls_text(chosen.recall_by_light));
    out += fmt::format("    recall_as_captured: {}\n", recalls_text(chosen.recall_as_captured));
    out += fmt::format("    worst_light: {}\n", quoted(chosen.worst_light));
    out += fmt::format("    worst_change: {}\n", quoted(chosen.worst_change));
    out += fmt::format("    false_positive_rate: {}\n", number_text(chosen.false_positive_rate));
    out += fmt::format("    score: {}\n", number_text(chosen.score));
    out += fmt::format("    bound: {}\n", number_text(chosen.bound));
    out += fmt::format("    gap: {}\n", number_text(chosen.gap));
    const Envelope& envelope = chosen.envelope;
    out += fmt::format("    envelope: {{stops: {}, kelvin: {}, broken_by: [{}, {}, {}, {}]}}\n",
                       range_text(envelope.stops),
                       range_text(envelope.kelvin),
                       quoted(envelope.broken_by[0]),
                       quoted(envelope.broken_by[1]),
                       quoted(envelope.broken_by[2]),
                       quoted(envelope.broken_by[3]));
  }
  return out;
}

std::vector<ChosenSet> read_chosen_sets(const std::filesystem::path& path) {
  const std::string text = read_file(path);
  std::vector<ChosenSet> sets;
  try {
    const YAML::Node top = YAML::Load(text);
    if (!top.IsMap() || !top["objects"].IsMap()) refuse(path, top, "holds no objects");
    for (const auto& entry : top["objects"]) {
      sets.push_back(read_set(path, entry.first.as<std::string>(), entry.second));
    }
  } catch (const YAML::Exception& error) {
    const int line = error.mark.is_null() ? 0 : error.mark.line + 1;
    throw InputError(line > 0 ? fmt::format("{}:{}", path.string(), line) : path.string(),
                     "is damaged (" + error.msg + "); run 'rondel colours' again");
  }
  return sets;
}

std::vector<ThresholdSet> read_threshold_sets(const std::filesystem::path& path) {
  std::vector<ThresholdSet> sets;
  for (ChosenSet& chosen : read_chosen_sets(path)) sets.push_back(std::move(chosen.set));
  return sets;
}

}  // namespace rondel::colour
