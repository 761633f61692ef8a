#include "tools/rondel/steps/check_batch.h"

#include <fmt/core.h>

#include <algorithm>
#include <atomic>
#include <chrono>
#include <cmath>
#include <exception>
#include <map>
#include <mutex>
#include <thread>
#include <tuple>

#include "calib/base/problem.h"
#include "vision/frames/load.h"

namespace rondel::app {
namespace {

int object_index(const VenueSpec& venue, const std::string& name) {
  for (std::size_t o = 0; o < venue.objects.size(); ++o) {
    if (venue.objects[o].name == name) return static_cast<int>(o);
  }
  return -1;
}

std::string place(const std::string& sheet, int line) { return fmt::format("{}:{}", sheet, line); }

/// Rows that cannot both be true.
void find_contradictions(const std::vector<TapeRow>& tape,
                         const std::string& sheet,
                         std::vector<Problem>& problems) {
  std::map<std::tuple<std::string, std::string, double, double>, int> seen;
  std::map<std::pair<std::string, std::string>, std::pair<int, int>> presence;  // lines
  for (const TapeRow& row : tape) {
    const double bearing = row.bearing_rad.value_or(10.0);
    const auto [same, fresh] =
        seen.insert({{row.image, row.object, row.absent ? -1.0 : row.range_m, bearing}, row.line});
    if (!fresh) {
      problems.push_back({place(sheet, row.line),
                          fmt::format("{}, {} is listed twice, first in line {}; delete one",
                                      row.image,
                                      row.object,
                                      same->second)});
      continue;
    }
    auto& [present_line, absent_line] = presence[{row.image, row.object}];
    (row.absent ? absent_line : present_line) = row.line;
    if (present_line != 0 && absent_line != 0) {
      problems.push_back(
          {place(sheet, row.line),
           fmt::format("{} in {} is said to be both there (line {}) and absent (line {}); an empty "
                       "range_m means absent",
                       row.object,
                       row.image,
                       present_line,
                       absent_line)});
    }
  }
}

/// One standard deviation of range and bearing for `noise_px` in u and v each.
void fill_noise(const Examiner& examiner, double height_m, verdict::Find& find) {
  constexpr double kStepPx = 0.5;
  const ImagePoint p = find.measured;
  double range = 0.0;
  double bearing = 0.0;
  for (const ImagePoint step : {ImagePoint{kStepPx, 0.0}, ImagePoint{0.0, kStepPx}}) {
    const auto above = examiner.curve->floor_at({p.u_px + step.u_px, p.v_px + step.v_px}, height_m);
    const auto below = examiner.curve->floor_at({p.u_px - step.u_px, p.v_px - step.v_px}, height_m);
    if (!above || !below) return;
    range += std::pow((above->range_m - below->range_m) / (2.0 * kStepPx), 2);
    bearing += std::pow(wrap_angle(above->bearing_rad - below->bearing_rad) / (2.0 * kStepPx), 2);
  }
  find.noise_range_m = examiner.pixel_noise * std::sqrt(range);
  find.noise_bearing_rad = examiner.pixel_noise * std::sqrt(bearing);
}

std::vector<verdict::Find> finds_in(const Examiner& examiner, const cv::Mat& bgr) {
  std::vector<verdict::Find> finds;
  for (const vision::Blob& blob : vision::detect(examiner.detector, bgr)) {
    verdict::Find find;
    find.object = blob.object;
    find.measured = blob.measured;
    find.area_px = blob.area_px;
    find.cut_by_mask = blob.cut_by_mask;
    report_find(*examiner.tables, find);
    if (examiner.curve != nullptr) {
      const double height_m =
          examiner.detector.objects[static_cast<std::size_t>(blob.object)].seen_height_m();
      find.unrounded = examiner.curve->floor_at(blob.measured, height_m);
      fill_noise(examiner, height_m, find);
    }
    finds.push_back(std::move(find));
  }
  return finds;
}

/// "checking images (210/s, 12 s left)": counts over all threads.
class Rate {
 public:
  Rate(Progress& progress, int total) : progress_(progress), total_(total) {}
  void one_more() {
    const std::lock_guard lock(mutex_);
    ++done_;
    const auto now = std::chrono::steady_clock::now();
    const std::chrono::duration<double> since = now - last_;
    if (done_ < total_ && since.count() < 0.2) return;
    last_ = now;
    const std::chrono::duration<double> spent = now - start_;
    const double rate = spent.count() > 0.0 ? done_ / spent.count() : 0.0;
    const double left_s = rate > 0.0 ? (total_ - done_) / rate : 0.0;
    progress_.at(
        fmt::format("checking ({:.0f} images/s, {:.0f} s left)", rate, left_s), done_, total_);
  }

 private:
  Progress& progress_;
  int total_;
  int done_ = 0;
  std::chrono::steady_clock::time_point start_ = std::chrono::steady_clock::now();
  std::chrono::steady_clock::time_point last_ = start_;
  std::mutex mutex_;
};

}  // namespace

void report_find(const link::BoardTables& tables, verdict::Find& find) {
  const link::Codes codes =
      link::encode(tables,
                   find.object,
                   static_cast<int>(std::lround(find.measured.u_px * link::kSubpixel)),
                   static_cast<int>(std::lround(find.measured.v_px * link::kSubpixel)));
  find.range_code = codes.range_code;
  find.bearing_code = codes.bearing_code;
  find.reported = link::decode(tables, codes);
}

TapeBatch make_batch(const VenueSpec& venue,
                     const std::vector<FrameFile>& frames,
                     const std::vector<TapeRow>& tape,
                     const std::string& sheet) {
  if (tape.empty()) {
    throw InputError(sheet,
                     "has no rows; write one row per measured object: "
                     "image,object,range_m,bearing_deg");
  }
  if (tape.size() > kMostTapeRows) {
    throw InputError(place(sheet, tape[kMostTapeRows].line),
                     fmt::format("row {} of {}: at most {} rows fit one check; split the sheet",
                                 kMostTapeRows + 1,
                                 tape.size(),
                                 kMostTapeRows));
  }
  std::vector<Problem> problems;
  find_contradictions(tape, sheet, problems);
  std::map<std::string, const FrameFile*> files;
  for (const FrameFile& file : frames) files[file.image] = &file;
  std::map<std::string, int> index_of;  // sorted by name
  for (const TapeRow& row : tape) {
    if (!files.contains(row.image)) {
      problems.push_back(
          {place(sheet, row.line), fmt::format("image {}: there is no such frame", row.image)});
    } else if (object_index(venue, row.object) < 0) {
      problems.push_back({place(sheet, row.line),
                          fmt::format("object {}: venue.yaml has no such object", row.object)});
    } else {
      index_of[row.image] = 0;
    }
  }
  if (!problems.empty()) throw InputError(std::move(problems));

  TapeBatch batch;
  batch.sheet = sheet;
  for (auto& [image, index] : index_of) {
    index = static_cast<int>(batch.images.size());
    batch.images.push_back({image, files[image]->light});
    batch.paths.push_back(files[image]->path);
  }
  for (const TapeRow& row : tape) {
    verdict::TapeEntry entry;
    entry.line = row.line;
    entry.image = index_of[row.image];
    entry.object = object_index(venue, row.object);
    entry.range_m = row.range_m;
    entry.bearing_rad = row.bearing_rad;
    entry.absent = row.absent;
    batch.tape.push_back(entry);
  }
  std::stable_sort(
      batch.tape.begin(),
      batch.tape.end(),
      [](const verdict::TapeEntry& a, const verdict::TapeEntry& b) { return a.image < b.image; });
  return batch;
}

void mark_hidden(const Examiner& examiner, const VenueSpec& venue, TapeBatch& batch) {
  if (examiner.curve == nullptr) return;
  const cv::Mat& mask = examiner.detector.mask;
  for (verdict::TapeEntry& entry : batch.tape) {
    if (entry.absent || !entry.bearing_rad) continue;
    const double height_m = venue.objects[static_cast<std::size_t>(entry.object)].seen_height_m();
    const auto at = examiner.curve->pixel_of({entry.range_m, *entry.bearing_rad}, height_m);
    entry.hidden = true;
    if (!at) continue;
    const int u = static_cast<int>(std::lround(at->u_px));
    const int v = static_cast<int>(std::lround(at->v_px));
    if (u < 0 || v < 0 || u >= mask.cols || v >= mask.rows) continue;
    entry.hidden = mask.at<std::uint8_t>(v, u) == 0;
  }
}

Examined examine(const Examiner& examiner,
                 const TapeBatch& batch,
                 Shard shard,
                 Progress& progress) {
  Examined examined;
  const std::size_t total = batch.images.size();
  examined.finds.resize(total);
  examined.done.assign(total, 0);
  std::vector<std::string> failures(total);
  std::vector<std::size_t> todo;
  for (std::size_t i = 0; i < total; ++i) {
    if (static_cast<int>(i % static_cast<std::size_t>(shard.count)) == shard.index) {
      todo.push_back(i);
    }
  }
  Rate rate(progress, static_cast<int>(todo.size()));
  std::atomic<std::size_t> next = 0;
  std::atomic<bool> stopped = false;
  std::exception_ptr fault;
  std::mutex fault_mutex;
  // Every slot is written by one thread only, so that the result does not depend on their timing.
  const auto work = [&] {
    for (std::size_t n = next++; n < todo.size(); n = next++) {
      if (progress.cancelled()) {
        stopped = true;
        return;
      }
      const std::size_t i = todo[n];
      try {
        examined.finds[i] = finds_in(examiner, vision::load_image(batch.paths[i], examiner.camera));
        examined.done[i] = 1;
      } catch (const InputError& error) {
        failures[i] = error.problems().front().what;
      } catch (...) {
        const std::lock_guard lock(fault_mutex);
        fault = std::current_exception();
        next = todo.size();
      }
      rate.one_more();
    }
  };
  const unsigned threads = std::clamp<unsigned>(std::thread::hardware_concurrency(), 1U, 64U);
  std::vector<std::thread> helpers;
  for (unsigned t = 1; t < std::min<std::size_t>(threads, todo.size()); ++t) {
    helpers.emplace_back(work);
  }
  work();
  for (std::thread& helper : helpers) helper.join();
  if (fault) std::rethrow_exception(fault);

  std::vector<Problem> problems;
  for (const verdict::TapeEntry& entry : batch.tape) {
    std::string& failure = failures[static_cast<std::size_t>(entry.image)];
    if (failure.empty()) continue;
    problems.push_back(
        {place(batch.sheet, entry.line),
         fmt::format(
             "image {}: {}", batch.images[static_cast<std::size_t>(entry.image)].image, failure)});
    failure.clear();  // once an image
  }
  if (!problems.empty()) throw InputError(std::move(problems));
  examined.stopped = stopped;
  examined.images_done =
      static_cast<int>(std::count(examined.done.begin(), examined.done.end(), char{1}));
  return examined;
}

}  // namespace rondel::app
