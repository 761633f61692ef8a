#include "calib/range/curve_file.h"

#include <fmt/format.h>
#include <yaml-cpp/yaml.h>

#include <cmath>

#include "calib/base/file.h"
#include "calib/base/problem.h"

namespace rondel::range {
namespace {

std::string n(double value) { return std::isfinite(value) ? number_text(value) : ".inf"; }

/// Single quotes, which YAML takes literally.
std::string quoted(const std::string& text) {
  std::string out = "'";
  for (const char c : text) {
    out += c;
    if (c == '\'') out += c;
  }
  return out + "'";
}

const char* word_of(Parameter::Prior prior) {
  switch (prior) {
    case Parameter::Prior::known:
      return "known";
    case Parameter::Prior::guess:
      return "guess";
    case Parameter::Prior::none:
      break;
  }
  return "none";
}

std::string mirror_yaml(const MirrorSpec& mirror) {
  std::string out = fmt::format("mirror: {{rim_radius_m: {}, ", n(mirror.rim_radius_m));
  if (std::holds_alternative<ConicSpec>(mirror.shape)) return out + "shape: conic}\n";
  if (std::holds_alternative<ConeSpec>(mirror.shape)) return out + "shape: cone}\n";
  const auto& profile = std::get<ProfileSpec>(mirror.shape);
  out += fmt::format("shape: profile, sag_sd_m: {}, points_m: [", n(profile.sag_sd_m));
  for (std::size_t i = 0; i < profile.points_m.size(); ++i) {
    out += fmt::format("{}[{}, {}]",
                       i == 0 ? "" : ", ",
                       n(profile.points_m[i].first),
                       n(profile.points_m[i].second));
  }
  return out + "]}\n";
}

MirrorSpec mirror_of(const YAML::Node& node) {
  MirrorSpec mirror;
  mirror.rim_radius_m = node["rim_radius_m"].as<double>();
  const auto shape = node["shape"].as<std::string>();
  if (shape == "conic") {
    mirror.shape = ConicSpec{};
  } else if (shape == "cone") {
    mirror.shape = ConeSpec{};
  } else {
    ProfileSpec profile;
    profile.sag_sd_m = node["sag_sd_m"].as<double>();
    for (const auto& point : node["points_m"]) {
      profile.points_m.emplace_back(point[0].as<double>(), point[1].as<double>());
    }
    mirror.shape = std::move(profile);
  }
  return mirror;
}

}  // namespace

std::string range_yaml(const FitResult& fit) {
  const ModelInput& made = fit.model_input;
  const RangeCurve& curve = *fit.curve;
  std::string out = fmt::format(
      "model: {}\nmarks: {}\nrms_px: {}\nleave_one_out_relative: {}\nreach_m: {}\n"
      "noise_scale: {}\ndegrees_of_freedom: {}\nt95: {}\n",
      fit.model,
      fit.marks,
      n(fit.rms_px),
      n(fit.leave_one_out_relative),
      n(fit.reach_m),
      n(fit.noise_scale),
      n(fit.degrees_of_freedom),
      n(curve.t95()));
  out += fmt::format("centre: {{u_px: {}, v_px: {}}}\nradius_limit_px: {}\n",
                     n(curve.centre().u_px),
                     n(curve.centre().v_px),
                     n(curve.radius_limit_px()));
  out += fmt::format("camera: {{width_px: {}, height_px: {}}}\n",
                     made.rig.camera.width_px,
                     made.rig.camera.height_px);
  out += fmt::format("mirrored: {}\nheading: {{is: {}, rad: {}}}\n",
                     made.mirrored,
                     made.heading == ModelInput::Heading::fixed   ? "fixed"
                     : made.heading == ModelInput::Heading::known ? "known"
                                                                  : "free",
                     n(made.heading_rad));
  if (made.rig.mirror) out += mirror_yaml(*made.rig.mirror);
  out += "marked_radii:\n";
  for (const auto& [radius, range] : made.radius_px_range_m) {
    out += fmt::format("  - [{}, {}]\n", n(radius), n(range));
  }
  out += "parameters:\n";
  for (const ParameterValue& p : fit.parameters) {
    out += fmt::format(
        "  - {{name: {}, value: {}, sd: {}, prior: {}, prior_value: {}, prior_sd: {}, shown: {}, "
        "unit: {}, factor: {}}}\n",
        p.parameter.name,
        n(p.value),
        n(p.sd),
        word_of(p.parameter.prior),
        n(p.parameter.start),
        n(p.parameter.scale),
        quoted(p.parameter.shown_name),
        quoted(p.parameter.shown_unit),
        n(p.parameter.shown_factor));
  }
  out += "covariance:\n";
  for (Eigen::Index i = 0; i < curve.covariance().rows(); ++i) {
    out += "  - [";
    for (Eigen::Index j = 0; j < curve.covariance().cols(); ++j) {
      out += (j == 0 ? "" : ", ") + n(curve.covariance()(i, j));
    }
    out += "]\n";
  }
  out += "residuals:\n";
  for (const MarkResidual& r : fit.residuals) {
    out += fmt::format(
        "  - {{mark: {}, du_px: {}, dv_px: {}, studentised: {}, leave_one_out_relative: {}, "
        "flagged: {}}}\n",
        r.mark,
        n(r.du_px),
        n(r.dv_px),
        n(r.studentised),
        n(r.leave_one_out_relative),
        r.flagged);
  }
  out += "flagged:\n";
  for (const Flagged& f : fit.flagged) {
    out += fmt::format(
        "  - {{mark: {}, studentised: {}, p: {}, range_error_m: {}, bearing_error_rad: {}, guess: "
        "{}}}\n",
        f.mark,
        n(f.studentised),
        n(f.p),
        n(f.range_error_m),
        n(f.bearing_error_rad),
        quoted(f.guess));
  }
  out += "candidates:\n";
  for (const Candidate& c : fit.candidates) {
    out += fmt::format(
        "  - {{model: {}, parameters: {}, effective_parameters: {}, rms_px: {}, "
        "leave_one_out_relative: {}, refused: {}}}\n",
        c.model,
        c.parameters,
        n(c.effective_parameters),
        n(c.rms_px),
        n(c.leave_one_out_relative),
        quoted(c.refused));
  }
  out += "notes:\n";
  for (const std::string& note : fit.notes) out += fmt::format("  - {}\n", quoted(note));
  return out;
}

std::shared_ptr<const RangeCurve> read_range_curve(const std::filesystem::path& file) {
  std::error_code error;
  if (!std::filesystem::is_regular_file(file, error)) {
    throw InputError(file.string(), "there is no range curve yet; run 'rondel range'");
  }
  try {
    const YAML::Node root = YAML::Load(read_file(file));
    const ModelRow* row = find_model(root["model"].as<std::string>());
    if (row == nullptr) throw InputError(file.string(), "names a model this program does not have");
    ModelInput made;
    made.rig.camera.width_px = root["camera"]["width_px"].as<int>();
    made.rig.camera.height_px = root["camera"]["height_px"].as<int>();
    made.rig.camera.focal_px = Uncertain{1.0, 1.0};
    made.mirrored = root["mirrored"].as<bool>();
    const auto heading = root["heading"]["is"].as<std::string>();
    made.heading = heading == "fixed"   ? ModelInput::Heading::fixed
                   : heading == "known" ? ModelInput::Heading::known
                                        : ModelInput::Heading::free;
    made.heading_rad = root["heading"]["rad"].as<double>();
    if (root["mirror"]) made.rig.mirror = mirror_of(root["mirror"]);
    for (const auto& pair : root["marked_radii"]) {
      made.radius_px_range_m.emplace_back(pair[0].as<double>(), pair[1].as<double>());
    }
    const std::shared_ptr<const Model> model = row->make(made, *row);
    const auto size = static_cast<Eigen::Index>(model->parameters().size());
    Params params(size);
    if (root["parameters"].size() != model->parameters().size()) {
      throw InputError(file.string(),
                       "has not the parameters of its model; run 'rondel range' again");
    }
    Eigen::MatrixXd covariance(size, size);
    for (Eigen::Index i = 0; i < size; ++i) {
      const auto k = static_cast<std::size_t>(i);
      params[i] = root["parameters"][k]["value"].as<double>();
      for (Eigen::Index j = 0; j < size; ++j) {
        covariance(i, j) = root["covariance"][k][static_cast<std::size_t>(j)].as<double>();
      }
    }
    return std::make_shared<RangeCurve>(
        model,
        params,
        covariance,
        root["t95"].as<double>(),
        ImagePoint{root["centre"]["u_px"].as<double>(), root["centre"]["v_px"].as<double>()},
        root["radius_limit_px"].as<double>());
  } catch (const YAML::Exception& trouble) {
    throw InputError(
        file.string(),
        fmt::format("is not a range curve ({}); run 'rondel range' again", trouble.what()));
  }
}

}  // namespace rondel::range
