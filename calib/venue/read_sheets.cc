#include "calib/venue/read_sheets.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <map>
#include <tuple>
#include <utility>

#include "calib/base/file.h"
#include "calib/venue/csv.h"
#include "calib/venue/words.h"
#include "calib/venue/yaml_map.h"

namespace rondel {
namespace {

constexpr Limits kRange_m = {0.0, 100.0, true};
constexpr Limits kBearing_deg = {-360.0, 360.0, false};

Limits across(int size_px) {
  const double far = size_px > 0 ? static_cast<double>(size_px) : 20000.0;
  return {-0.5, far - 0.5, false};
}

/// The row's image, or nothing and a problem.
std::optional<std::string> image_of(const CsvRow& row, const SheetContext& context) {
  const std::string& image = row.cell("image");
  if (image.empty()) {
    row.complain("image", "is empty; name the image the row is about");
    return std::nullopt;
  }
  if (const auto trouble = context.trouble_with(image)) {
    row.complain("image", *trouble);
    return std::nullopt;
  }
  return image;
}

/// Whether the row's `column` names an object of the venue, or `also`; a problem when not.
bool names_object(const CsvRow& row,
                  std::string_view column,
                  const SheetContext& context,
                  std::string_view also = "") {
  const std::string& name = row.cell(column);
  if (name.empty()) {
    row.complain(column, "is empty; name an object of venue.yaml");
    return false;
  }
  if (name == also || context.venue.find_object(name) != nullptr) return true;
  std::vector<std::string> allowed;
  for (const ObjectSpec& object : context.venue.objects) allowed.push_back(object.name);
  if (!also.empty()) allowed.emplace_back(also);
  row.complain(column, "is no object of venue.yaml" + hint_for(name, allowed));
  return false;
}

/// The cell's bearing in radians. `fine` becomes false when there is one and it is wrong.
std::optional<double> bearing_of(const CsvRow& row, bool& fine) {
  const auto bearing_deg = row.number_if_any("bearing_deg", kBearing_deg);
  if (!bearing_deg) {
    fine = fine && row.cell("bearing_deg").empty();
    return std::nullopt;
  }
  return wrap_angle(*bearing_deg * kRadPerDeg);
}

/// The cell `points` as numbers between blanks; nothing and a problem where one is none.
std::optional<std::vector<double>> numbers_of(const CsvRow& row) {
  std::vector<double> numbers;
  std::string_view text = row.cell("points");
  if (text.empty()) {
    row.complain("points", "is empty; write its numbers with blanks between them");
    return std::nullopt;
  }
  while (true) {
    const std::size_t begin = text.find_first_not_of(" \t\r\n");
    if (begin == std::string_view::npos) return numbers;
    text.remove_prefix(begin);
    const std::size_t end = std::min(text.find_first_of(" \t\r\n"), text.size());
    const std::string_view word = text.substr(0, end);
    const auto number = parse_number(word);
    if (!number || !(std::abs(*number) <= 20000.0)) {
      row.complain(
          "points",
          fmt::format(
              "'{}' {}", quotable(word), number ? "is beyond any image" : why_no_number(word)));
      return std::nullopt;
    }
    numbers.push_back(*number);
    text.remove_prefix(end);
  }
}

std::vector<ImagePoint> paired(const std::vector<double>& numbers) {
  std::vector<ImagePoint> points;
  for (std::size_t i = 0; i + 1 < numbers.size(); i += 2) {
    points.push_back({numbers[i], numbers[i + 1]});
  }
  return points;
}

bool in_image(ImagePoint p, const CameraSpec& camera) {
  const Limits u = across(camera.width_px);
  const Limits v = across(camera.height_px);
  return u.low <= p.u_px && p.u_px <= u.high && v.low <= p.v_px && p.v_px <= v.high;
}

std::optional<Region> region_of(const CsvRow& row, const CameraSpec& camera) {
  static const std::vector<std::string> kShapes = {"disc", "box", "polygon", "grow"};
  const std::string& shape = row.cell("shape");
  if (std::find(kShapes.begin(), kShapes.end(), shape) == kShapes.end()) {
    row.complain("shape",
                 shape.empty() ? "is empty; allowed: " + joined(kShapes)
                               : "is no shape" + hint_for(shape, kShapes));
    return std::nullopt;
  }
  const auto numbers = numbers_of(row);
  if (!numbers) return std::nullopt;
  const std::size_t count = numbers->size();
  const std::vector<ImagePoint> points = paired(*numbers);
  std::optional<Region> region;
  if (shape == "disc") {
    if (count != 3) {
      row.complain("points", "a disc is 'u v radius', three numbers");
    } else if (!((*numbers)[2] > 0.0)) {
      row.complain("points", "a disc's radius must be above 0");
    } else {
      region = Disc{points[0], (*numbers)[2]};
    }
  } else if (shape == "box") {
    if (count != 4) {
      row.complain("points", "a box is 'u0 v0 u1 v1', four numbers");
    } else {
      region =
          Box{{std::min(points[0].u_px, points[1].u_px), std::min(points[0].v_px, points[1].v_px)},
              {std::max(points[0].u_px, points[1].u_px), std::max(points[0].v_px, points[1].v_px)}};
    }
  } else if (shape == "polygon") {
    if (count < 6 || count % 2 != 0) {
      row.complain("points", "a polygon is 'u0 v0 u1 v1 u2 v2 ...', three corners or more");
    } else {
      region = Polygon{points};
    }
  } else {
    if (count != 2) {
      row.complain("points", "grow takes 'u v', two numbers");
    } else {
      region = Grow{points[0]};
    }
  }
  if (region && std::none_of(points.begin(), points.end(), [&](ImagePoint p) {
        return in_image(p, camera);
      })) {
    row.complain(
        "points",
        fmt::format("no corner is inside the {} x {} image", camera.width_px, camera.height_px));
    return std::nullopt;
  }
  return region;
}

std::string points_text(const std::vector<ImagePoint>& points) {
  std::string out;
  for (const ImagePoint& p : points) {
    if (!out.empty()) out += ' ';
    out += number_text(p.u_px) + ' ' + number_text(p.v_px);
  }
  return out;
}

/// Degrees that read back to just these radians where there are such.
std::string degrees_text(std::optional<double> angle_rad) {
  if (!angle_rad) return "";
  const double exact_deg = *angle_rad * kDegPerRad;
  const double short_deg = std::round(exact_deg * 1e6) / 1e6;
  return number_text(short_deg * kRadPerDeg == *angle_rad ? short_deg : exact_deg);
}

}  // namespace

std::vector<Mark> read_marks(std::string_view text,
                             const std::string& file,
                             const SheetContext& context,
                             std::vector<Problem>& problems) {
  std::vector<Mark> marks;
  const CsvTable table =
      read_csv(text,
               file,
               {{"image", "u_px", "v_px", "object", "range_m", "bearing_deg"}, {"note"}},
               problems);
  for (const CsvRow& row : table.rows) {
    Mark mark;
    mark.line = row.line();
    bool fine = true;
    if (!row.cell("image").empty()) {
      const auto image = image_of(row, context);
      fine = fine && image;
      mark.image = image.value_or("");
    }
    const auto u_px = row.number("u_px", across(context.camera.width_px));
    const auto v_px = row.number("v_px", across(context.camera.height_px));
    if (!row.cell("object").empty()) fine = names_object(row, "object", context) && fine;
    mark.object = row.cell("object");
    const auto range_m = row.number("range_m", kRange_m);
    mark.bearing_rad = bearing_of(row, fine);
    if (!fine || !u_px || !v_px || !range_m) continue;
    mark.pixel = {*u_px, *v_px};
    mark.range_m = *range_m;
    marks.push_back(std::move(mark));
  }
  return marks;
}

std::vector<Swatch> read_swatches(std::string_view text,
                                  const std::string& file,
                                  const SheetContext& context,
                                  std::vector<Problem>& problems) {
  std::vector<Swatch> swatches;
  const CsvTable table =
      read_csv(text, file, {{"image", "label", "shape", "points"}, {"note"}}, problems);
  for (const CsvRow& row : table.rows) {
    const auto image = image_of(row, context);
    const bool labelled = names_object(row, "label", context, kSurroundings);
    const auto region = region_of(row, context.camera);
    if (!image || !labelled || !region) continue;
    swatches.push_back({row.line(), *image, row.cell("label"), *region});
  }
  return swatches;
}

std::vector<Stroke> read_strokes(std::string_view text,
                                 const std::string& file,
                                 const SheetContext& /*context*/,
                                 std::vector<Problem>& problems) {
  std::vector<Stroke> strokes;
  const CsvTable table = read_csv(text, file, {{"kind", "width_px", "points"}, {"note"}}, problems);
  for (const CsvRow& row : table.rows) {
    Stroke stroke;
    stroke.line = row.line();
    const std::string& kind = row.cell("kind");
    const bool known = kind == "hide" || kind == "show";
    if (!known) {
      const std::vector<std::string> kinds = {"hide", "show"};
      row.complain("kind",
                   kind.empty() ? "is empty; allowed: hide, show"
                                : "is no kind of stroke" + hint_for(kind, kinds));
    }
    stroke.hide = kind == "hide";
    const auto width_px = row.number("width_px", {0.0, 2000.0, true});
    const auto numbers = numbers_of(row);
    if (numbers && numbers->size() % 2 != 0) {
      row.complain("points", "a stroke is 'u0 v0 u1 v1 ...', one point or more");
      continue;
    }
    if (!known || !width_px || !numbers) continue;
    stroke.width_px = *width_px;
    stroke.points = paired(*numbers);
    strokes.push_back(std::move(stroke));
  }
  return strokes;
}

std::vector<TapeRow> read_tape(std::string_view text,
                               const std::string& file,
                               const SheetContext& context,
                               std::vector<Problem>& problems) {
  std::vector<TapeRow> tape;
  const CsvTable table =
      read_csv(text, file, {{"image", "object", "range_m", "bearing_deg"}, {"note"}}, problems);
  // The lines that speak of an object in an image: to find rows that repeat or contradict.
  std::map<std::pair<std::string, std::string>, std::vector<TapeRow>> spoken_of;
  for (const CsvRow& row : table.rows) {
    TapeRow entry;
    entry.line = row.line();
    const auto image = image_of(row, context);
    bool fine = names_object(row, "object", context) && image;
    entry.object = row.cell("object");
    entry.bearing_rad = bearing_of(row, fine);
    entry.absent = row.cell("range_m").empty();
    if (!entry.absent) {
      const auto range_m = row.number("range_m", kRange_m);
      fine = fine && range_m;
      entry.range_m = range_m.value_or(0.0);
    } else if (!row.cell("bearing_deg").empty()) {
      row.complain("range_m",
                   "is empty, but bearing_deg is not; fill in both, or neither where the "
                   "object is not in the image");
      fine = false;
    }
    if (!fine) continue;
    entry.image = *image;
    auto& others = spoken_of[{entry.image, entry.object}];
    const auto clash = std::find_if(others.begin(), others.end(), [&](const TapeRow& other) {
      return other.absent || entry.absent ||
             (other.range_m == entry.range_m && other.bearing_rad == entry.bearing_rad);
    });
    if (clash != others.end()) {
      row.complain(
          "object",
          clash->absent != entry.absent
              ? fmt::format("line {} says the contrary; is the object in the image or not?",
                            clash->line)
              : fmt::format("line {} says just the same; remove one", clash->line));
      continue;
    }
    others.push_back(entry);
    tape.push_back(std::move(entry));
  }
  return tape;
}

std::string marks_csv(const std::vector<Mark>& marks) {
  std::string out = "image,u_px,v_px,object,range_m,bearing_deg\n";
  for (const Mark& mark : marks) {
    out += fmt::format("{},{},{},{},{},{}\n",
                       csv_cell(mark.image),
                       number_text(mark.pixel.u_px),
                       number_text(mark.pixel.v_px),
                       csv_cell(mark.object),
                       number_text(mark.range_m),
                       degrees_text(mark.bearing_rad));
  }
  return out;
}

std::string swatches_csv(const std::vector<Swatch>& swatches) {
  std::string out = "image,label,shape,points\n";
  for (const Swatch& swatch : swatches) {
    const char* shape = "";
    std::string points;
    if (const auto* disc = std::get_if<Disc>(&swatch.region)) {
      shape = "disc";
      points = points_text({disc->centre}) + ' ' + number_text(disc->radius_px);
    } else if (const auto* box = std::get_if<Box>(&swatch.region)) {
      shape = "box";
      points = points_text({box->low, box->high});
    } else if (const auto* polygon = std::get_if<Polygon>(&swatch.region)) {
      shape = "polygon";
      points = points_text(polygon->corners);
    } else {
      shape = "grow";
      points = points_text({std::get<Grow>(swatch.region).seed});
    }
    out +=
        fmt::format("{},{},{},{}\n", csv_cell(swatch.image), csv_cell(swatch.label), shape, points);
  }
  return out;
}

std::string strokes_csv(const std::vector<Stroke>& strokes) {
  std::string out = "kind,width_px,points\n";
  for (const Stroke& stroke : strokes) {
    out += fmt::format("{},{},{}\n",
                       stroke.hide ? "hide" : "show",
                       number_text(stroke.width_px),
                       points_text(stroke.points));
  }
  return out;
}

std::string tape_csv(const std::vector<TapeRow>& tape) {
  std::string out = "image,object,range_m,bearing_deg\n";
  for (const TapeRow& row : tape) {
    out += fmt::format("{},{},{},{}\n",
                       csv_cell(row.image),
                       csv_cell(row.object),
                       row.absent ? "" : number_text(row.range_m),
                       degrees_text(row.bearing_rad));
  }
  return out;
}

}  // namespace rondel
