#include "tools/rondel/steps/tables_step.h"

#include <fmt/format.h>
#include <yaml-cpp/yaml.h>

#include <algorithm>
#include <filesystem>
#include <opencv2/core.hpp>
#include <system_error>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "calib/colour/sets_file.h"
#include "calib/link/link_plan.h"
#include "calib/range/curve_file.h"
#include "tools/firmware/emit.h"
#include "tools/rondel/results.h"
#include "vision/mask/mask_file.h"

namespace rondel::app {
namespace {

namespace fs = std::filesystem;
using nlohmann::ordered_json;

constexpr const char* kVenueFile = "venue.yaml";

const char* name_of(CodebookMeasure measure) {
  switch (measure) {
    case CodebookMeasure::absolute:
      return "absolute";
    case CodebookMeasure::rms:
      return "rms";
    case CodebookMeasure::noise_matched:
      return "noise_matched";
    case CodebookMeasure::relative:
      break;
  }
  return "relative";
}

bool is_there(const fs::path& path) {
  std::error_code error;
  return fs::is_regular_file(path, error);
}

ordered_json sizes(const link::BoardTables& tables, std::size_t binary) {
  return {{"camera_tables", link::table_bytes(tables)},
          {"drive_tables", 2 * tables.range_codes()},
          {"class_table", link::class_bytes(tables)},
          {"mask", 4 * tables.mask.size()},
          {"binary", binary}};
}

ordered_json codebook_json(const LinkSpec& link, const link::Codebook& book) {
  return {{"codes", book.size()},
          {"measure", name_of(link.measure)},
          {"near_m", link.near_m},
          {"far_m", link.far_m},
          {"worst_relative_error", book.worst_relative_error()},
          {"rms_relative_error", book.rms_relative_error()},
          {"bound", link::relative_bound(link.near_m, link.far_m, book.size())}};
}

ordered_json link_json(const LinkSpec& link, const link::LinkPlan& plan) {
  ordered_json clocks = ordered_json::array();
  for (const link::ClockError& clock : plan.clocks) {
    clocks.push_back({{"clock_hz", clock.clock_hz},
                      {"oversampling", clock.oversampling},
                      {"relative_error", clock.relative},
                      {"tolerable", clock.tolerable}});
  }
  return {{"bytes_per_report", plan.report.bytes},
          {"utilisation", plan.utilisation},
          {"latency_ms", 1e3 * plan.report_s},
          {"worst_age_ms", 1e3 * plan.worst_age_s},
          {"baud", link.baud},
          {"reports_per_second", link.reports_per_second},
          {"clocks", clocks},
          {"warnings", plan.warnings}};
}

ordered_json layouts_json(const link::BuiltTables& built) {
  ordered_json layouts = ordered_json::array();
  for (const link::HeightTradeOff& height : built.heights) {
    ordered_json tried = ordered_json::array();
    for (const link::Candidate& c : height.candidates) {
      tried.push_back({{"name", c.name},
                       {"bytes", c.bytes},
                       {"worst_relative_error", c.worst_relative_error},
                       {"share_of_target", c.worst_share},
                       {"chosen", c.chosen}});
    }
    layouts.push_back(
        {{"height_m", height.height_m}, {"objects", height.objects}, {"tried", tried}});
  }
  return layouts;
}

std::string summary_of(const link::BuiltTables& built,
                       const VenueSpec& venue,
                       const link::LinkPlan& plan,
                       bool with_colours) {
  const link::BoardTables& tables = built.tables;
  std::string text = fmt::format(
      "Identity {:08X}; {} bytes of {} for range, bearing and tilt on the camera board\n"
      "{} range codes from {:g} to {:g} m, off by at most {:.2f} % ({:.2f} % is possible)\n",
      tables.identity,
      link::table_bytes(tables),
      venue.budget.table_bytes,
      built.book.size(),
      venue.link.near_m,
      venue.link.far_m,
      100.0 * built.book.worst_relative_error(),
      100.0 * link::relative_bound(venue.link.near_m, venue.link.far_m, built.book.size()));
  for (const link::HeightTradeOff& height : built.heights) {
    for (const link::Candidate& c : height.candidates) {
      if (!c.chosen) continue;
      text += fmt::format("At {:.0f} mm: layout '{}', {} bytes, every pixel within {:.1f} %\n",
                          1e3 * height.height_m,
                          c.name,
                          c.bytes,
                          100.0 * c.worst_relative_error);
    }
  }
  text += fmt::format(
      "Report of {} bytes: {:.2f} ms on the line at {} baud, {:.0f} % of its time; a reading is at "
      "most {:.0f} ms old on arrival of the next",
      plan.report.bytes,
      1e3 * plan.report_s,
      venue.link.baud,
      100.0 * plan.utilisation,
      1e3 * plan.worst_age_s);
  if (!with_colours) text += "\nMade without colours: no class table";
  if (built.class_agreement < 1.0) {
    text += fmt::format("\nThe class table keeps the class of {:.2f} % of all colours in {} bytes",
                        100.0 * built.class_agreement,
                        link::class_bytes(tables));
  }
  for (const std::string& warning : plan.warnings) text += "\nNote: " + warning;
  return text;
}

/// Files of an earlier manifest that are made no longer.
void remove_old(const fs::path& folder, const std::vector<firmware::Artefact>& artefacts) {
  std::vector<std::string> old;
  try {
    const YAML::Node node = YAML::LoadFile((folder / "manifest.yaml").string());
    for (const auto& file : node["files"]) old.push_back(file["name"].as<std::string>());
  } catch (const YAML::Exception&) {
    return;  // no manifest, or one that says nothing
  }
  for (const std::string& name : old) {
    const bool made = std::any_of(artefacts.begin(), artefacts.end(), [&](const auto& artefact) {
      return artefact.name == name;
    });
    if (made || fs::path(name).filename() != fs::path(name)) continue;
    std::error_code error;
    fs::remove(folder / name, error);
  }
}

}  // namespace

TablesInputs read_tables_inputs(const Workspace& workspace) {
  TablesInputs inputs;
  inputs.map = range::read_range_curve(result_of(workspace, "range"));
  const fs::path mask_file = workspace.results() / "mask.png";
  if (is_there(mask_file)) {
    const cv::Mat mask = vision::read_mask(mask_file, workspace.rig.camera);
    for (int v = 0; v < mask.rows; ++v) {
      inputs.mask.insert(
          inputs.mask.end(), mask.ptr<std::uint8_t>(v), mask.ptr<std::uint8_t>(v) + mask.cols);
    }
    if (std::find_if(inputs.mask.begin(), inputs.mask.end(), [](std::uint8_t m) {
          return m != 0;
        }) == inputs.mask.end()) {
      throw InputError(mask_file.string(), "hides every pixel; run 'rondel mask' again");
    }
  }
  const fs::path colours = result_of(workspace, "colours");
  if (is_there(colours)) {
    // A class's number is its object's, whatever the file's order; an object may have no set.
    const std::vector<colour::ThresholdSet> read = colour::read_threshold_sets(colours);
    for (const ObjectSpec& object : workspace.venue.objects) {
      const auto set = std::find_if(
          read.begin(), read.end(), [&](const auto& s) { return s.object == object.name; });
      inputs.sets.push_back(set != read.end() ? *set : colour::ThresholdSet{object.name, {}});
    }
    inputs.classes = colour::make_class_table(inputs.sets);
  }
  return inputs;
}

link::BuiltTables make_tables(const Workspace& workspace,
                              const TablesInputs& inputs,
                              Progress& progress) {
  return link::build_tables(*inputs.map,
                            workspace.venue,
                            workspace.rig.camera,
                            inputs.mask,
                            inputs.classes,
                            inputs.sets,
                            {},
                            (workspace.folder / kVenueFile).string(),
                            progress);
}

Outcome tables_step(const Workspace& workspace, Progress& progress) {
  const VenueSpec& venue = workspace.venue;
  const link::LinkPlan plan = link::plan_link(
      venue.link, static_cast<int>(venue.objects.size()), (workspace.folder / kVenueFile).string());
  const TablesInputs inputs = read_tables_inputs(workspace);
  if (inputs.mask.empty()) progress.note("without a mask: every pixel counts as floor");
  const link::BuiltTables built = make_tables(workspace, inputs, progress);
  const std::vector<firmware::Artefact> artefacts = firmware::all_artefacts(built.tables);
  const std::string manifest =
      with_made_from(firmware::manifest(built.tables, artefacts), inputs_of(workspace, "tables"));

  std::size_t binary = 0;
  ordered_json files = ordered_json::array();
  for (const firmware::Artefact& artefact : artefacts) {
    if (artefact.name.ends_with(".bin")) binary = artefact.bytes.size();
    files.push_back({{"name", artefact.name}, {"bytes", artefact.bytes.size()}});
  }
  ordered_json resolutions = ordered_json::array();
  for (const link::Resolution& r : built.resolutions) {
    resolutions.push_back({{"range_m", r.range_m}, {"pixel_m", r.pixel_m}, {"code_m", r.code_m}});
  }
  Outcome outcome;
  outcome.document["identity"] = fmt::format("{:08X}", built.tables.identity);
  outcome.document["bytes"] = sizes(built.tables, binary);
  outcome.document["codebook"] = codebook_json(venue.link, built.book);
  outcome.document["link"] = link_json(venue.link, plan);
  outcome.document["layouts"] = layouts_json(built);
  outcome.document["resolutions"] = resolutions;
  outcome.document["class_agreement"] = built.class_agreement;
  outcome.document["files"] = files;
  outcome.summary = summary_of(built, venue, plan, !inputs.sets.empty());

  const fs::path folder = workspace.results() / "tables";
  remove_old(folder, artefacts);
  for (const firmware::Artefact& artefact : artefacts)
    write_file(folder / artefact.name, artefact.bytes);
  write_file(folder / "tables.json", outcome.document.dump(1) + "\n");
  write_file(folder / "manifest.yaml", manifest);
  return outcome;
}

void verify_tables(const Workspace& workspace, Outcome& outcome) {
  const TablesInputs inputs = read_tables_inputs(workspace);
  const fs::path path = workspace.results() / "tables" / (workspace.venue.prefix + ".bin");
  const std::string bytes = read_file(path);
  const link::BoardTables tables = link::unpack(
      {reinterpret_cast<const std::uint8_t*>(bytes.data()), bytes.size()}, path.string());
  ordered_json objects = ordered_json::object();
  for (std::size_t i = 0; i < tables.objects.size(); ++i) {
    const link::RoundTrip trip =
        link::verify(tables, *inputs.map, static_cast<int>(i), inputs.mask, {});
    objects[tables.objects[i].name] = {{"pixels", trip.pixels},
                                       {"outside", trip.outside},
                                       {"share_of_target", trip.worst_share},
                                       {"worst_relative_error", trip.worst_relative_error},
                                       {"rms_relative_error", trip.rms_relative_error},
                                       {"worst_bearing_deg", trip.worst_bearing_rad * kDegPerRad},
                                       {"worst_at", {trip.worst_at.u_px, trip.worst_at.v_px}}};
    outcome.summary += fmt::format(
        "\n{}: {} pixels there and back, range off by {:.2f} % at most ({:.2f} % root mean "
        "square), "
        "bearing by {:.1f} degrees{}",
        tables.objects[i].name,
        trip.pixels,
        100.0 * trip.worst_relative_error,
        100.0 * trip.rms_relative_error,
        trip.worst_bearing_rad * kDegPerRad,
        trip.outside == 0
            ? ""
            : fmt::format(
                  "; {} farther off than the target allows, worst at pixel ({:.0f}, {:.0f})",
                  trip.outside,
                  trip.worst_at.u_px,
                  trip.worst_at.v_px));
    if (trip.outside > 0) outcome.status = 1;
  }
  outcome.document["verify"] = objects;
}

}  // namespace rondel::app
