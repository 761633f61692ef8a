#pragma once

#include <filesystem>
#include <functional>
#include <map>
#include <memory>
#include <mutex>
#include <nlohmann/json.hpp>
#include <opencv2/core.hpp>
#include <optional>
#include <string>
#include <vector>

#include "calib/colour/threshold_set.h"
#include "calib/range/fit.h"
#include "tools/desk/journal.h"
#include "tools/desk/work.h"
#include "tools/rondel/workspace.h"
#include "vision/swatch/collect.h"

namespace rondel::app {

/// A request that cannot be answered as it stands: what HTTP calls 4xx.
class Refusal : public std::exception {
 public:
  Refusal(int status, std::string text) : status_(status), text_(std::move(text)) {}
  [[nodiscard]] int status() const { return status_; }
  [[nodiscard]] const char* what() const noexcept override { return text_.c_str(); }

 private:
  int status_;
  std::string text_;
};

/// Bytes for the page to show or to save.
struct Picture {
  std::string type;  ///< "image/png"
  std::string bytes;
};

/// One venue on the desk: what the page asks for, and what it changes. Every answer is made from
/// what is on disk now; what is dear to compute is kept for as long as the files it was made from
/// stay the same. May be used from several threads at once. JSON is as the page's modules read it.
class Bench {
 public:
  Bench(std::filesystem::path folder, desk::Events& events);

  // ---- asking (bench.cc, bench_answers.cc)

  /// Everything about the venue in one answer. A venue whose files have mistakes is shown too:
  /// "problems" lists them, and what could not be read is empty.
  [[nodiscard]] nlohmann::ordered_json everything();
  /// From a pixel to the floor, or the other way round, at the height of an object ("": the floor).
  [[nodiscard]] nlohmann::ordered_json place_of_pixel(ImagePoint at, const std::string& object);
  [[nodiscard]] nlohmann::ordered_json pixel_of_place(FloorSpot spot, const std::string& object);
  /// The object's blob at a pixel: {"u_px", "v_px", "area_px"}, or {} where there is none.
  [[nodiscard]] nlohmann::ordered_json snap(const std::string& image,
                                            ImagePoint at,
                                            const std::string& object);
  /// {"spots", "enough", "why"}.
  [[nodiscard]] nlohmann::ordered_json advice();
  /// What changed from another venue or its results to this one: {"summary", ...}.
  [[nodiscard]] nlohmann::ordered_json comparison(const std::string& other);
  /// {"marks": [...]} as they are being moved: the curve through them.
  [[nodiscard]] nlohmann::ordered_json try_marks(const nlohmann::json& request);
  /// {"object", "boxes"}: recall and false positives in every light, as captured.
  [[nodiscard]] nlohmann::ordered_json try_boxes(const nlohmann::json& request);
  /// {"near_m", "far_m", "range_bits", "baud", "table_bytes"}: the tables these would give.
  [[nodiscard]] nlohmann::ordered_json try_link(const nlohmann::json& request);
  /// How often each hue and saturation, saturation and value occur in an object's swatches and
  /// around them: {"hs": {"object": rows, "surroundings": rows}, "sv": ...}, shares of the largest.
  [[nodiscard]] nlohmann::ordered_json densities(const std::string& object);
  /// {"file", "text"}: {"problems": [...]} that the venue would have with it.
  [[nodiscard]] nlohmann::ordered_json examine(const nlohmann::json& request);

  // ---- changing (bench_edits.cc)

  void edit(const nlohmann::json& request);
  /// Adds an image to a light's frames; answers with its name in the venue.
  std::string add_frame(const std::string& light, const std::string& name, std::string bytes);
  /// Writes these link and budget keys into venue.yaml's text and leaves all else as it is.
  void write_link(const nlohmann::json& request);
  std::string undo();
  std::string redo();

  // ---- pictures and files (bench_pictures.cc)

  [[nodiscard]] Picture frame(const std::string& image);
  [[nodiscard]] Picture mask();  ///< what is hidden as a veil, strokes on top
  /// What the threshold sets take, over the frame or alone.
  [[nodiscard]] Picture classes(const std::string& image, bool over);
  [[nodiscard]] Picture artefact(const std::string& name);
  [[nodiscard]] Picture report();

  // ---- long work (bench_work.cc)

  /// Runs a step, or "all" that are stale, in this thread.
  nlohmann::ordered_json run(const std::string& step, const std::string& batch, Progress& progress);

  /// Changes with everything the page shows of this venue, whoever changed it.
  [[nodiscard]] std::string stamp() const;

 private:
  /// The range curve that counts now, with what is told of it.
  struct Curve {
    std::shared_ptr<const range::RangeCurve> curve;
    std::string model;
    double rms_px = 0.0;
    double leave_one_out_relative = 0.0;
    double reach_m = 0.0;
    std::vector<int> flagged;  ///< lines of marks.csv
    std::vector<std::string> reasons;
  };
  struct Geometry {
    std::optional<Curve> curve;  ///< of results/range.yaml, or of the marks as they are now
    cv::Mat mask;                ///< with the strokes as they are now; empty: none yet
    nlohmann::ordered_json blind_zone;
  };
  struct Failure {
    std::string inputs, text;
  };
  template <typename T>
  struct Kept {
    std::mutex mutex;
    std::string stamp;
    std::shared_ptr<const T> value;
    /// The kept value, or a new one where `now` is not what it was made from.
    template <typename Make>
    std::shared_ptr<const T> get(const std::string& now, const Make& make) {
      const std::lock_guard lock(mutex);
      if (!value || stamp != now) {
        value = std::make_shared<const T>(make());
        stamp = now;
      }
      return value;
    }
  };

  [[nodiscard]] Workspace open() const;
  [[nodiscard]] std::string hashes(std::initializer_list<const char*> files) const;
  [[nodiscard]] std::shared_ptr<const Workspace> workspace();
  [[nodiscard]] std::shared_ptr<const Geometry> geometry();
  [[nodiscard]] std::shared_ptr<const vision::Labelled> labelled();
  [[nodiscard]] std::vector<colour::ThresholdSet> sets(const Workspace& workspace) const;
  [[nodiscard]] const FrameFile& frame_file(const Workspace& workspace,
                                            const std::string& image) const;
  [[nodiscard]] static Curve shown(const range::FitResult& fit, const std::vector<Mark>& marks);
  [[nodiscard]] Curve curve_on_file(const Workspace& workspace) const;
  [[nodiscard]] static nlohmann::ordered_json curve_json(const Curve& curve,
                                                         const std::vector<Mark>& marks,
                                                         const VenueSpec& venue);
  [[nodiscard]] static nlohmann::ordered_json places_json(const Curve& curve,
                                                          const std::vector<Mark>& marks,
                                                          const VenueSpec& venue);
  [[nodiscard]] std::vector<std::string> problems_with(const std::string& file,
                                                       const std::string& text) const;
  void describe(const Workspace& workspace, nlohmann::ordered_json& answer);
  void describe_files(nlohmann::ordered_json& answer) const;
  void check_frames(const Workspace& workspace);

  std::filesystem::path folder_;
  desk::Events& events_;
  std::shared_ptr<HashStore> hashes_;
  std::mutex edits_;  ///< guards journal_
  desk::Journal journal_;
  Kept<Workspace> workspace_;
  Kept<Geometry> geometry_;
  Kept<vision::Labelled> labelled_;
  std::mutex failing_;                       ///< guards what follows
  std::map<std::string, Failure> failures_;  ///< by step
  /// By image: the content that was looked at, and what is wrong with it.
  std::map<std::string, std::pair<std::string, std::string>> frame_checks_;
};

/// The sheets and YAML files of a venue that the desk shows and changes.
[[nodiscard]] const std::vector<std::string>& venue_files();

/// InputError as lines for the page.
[[nodiscard]] std::vector<std::string> lines_of(const InputError& error);

}  // namespace rondel::app
