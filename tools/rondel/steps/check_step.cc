#include "tools/rondel/steps/check_step.h"

#include <fmt/core.h>

#include <algorithm>
#include <map>
#include <set>
#include <system_error>
#include <utility>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "tools/rondel/board.h"
#include "tools/rondel/hash_store.h"
#include "tools/rondel/report/page.h"
#include "tools/rondel/results.h"
#include "tools/rondel/steps/check_causes.h"
#include "tools/rondel/steps/check_files.h"
#include "tools/rondel/steps/check_repair.h"

namespace rondel::app {
namespace {

namespace fs = std::filesystem;
using nlohmann::ordered_json;

/// One standard deviation of a blob's place, px.
constexpr double kBlobPx = 0.3;

/// Whose images are held against which sheet, and where the results go.
struct Source {
  fs::path folder;
  std::vector<FrameFile> frames;
  std::vector<TapeRow> tape;
  bool other = false;  ///< not the venue's own
  [[nodiscard]] std::string sheet() const { return (folder / "tape.csv").string(); }
  [[nodiscard]] fs::path results() const { return folder / "results"; }
};

Source source_of(const Workspace& workspace, const CheckOptions& options) {
  if (!options.batch) return {workspace.folder, workspace.frames, workspace.tape, false};
  Batch batch = open_batch(workspace, *options.batch);
  return {batch.folder, std::move(batch.frames), std::move(batch.tape), true};
}

/// The inputs of a check, with the batch's images and sheet in the place of the venue's.
MadeFrom inputs(const Workspace& workspace, const Source& source) {
  if (!source.other) return inputs_of(workspace, "check");
  Workspace seen = workspace;
  seen.frames = source.frames;
  MadeFrom made_from = inputs_of(seen, "check");
  for (auto& [name, hash] : made_from) {
    if (name == "tape.csv") hash = workspace.hashes->hash_of(source.folder / "tape.csv");
  }
  return made_from;
}

fs::path shard_path(const fs::path& results, Shard shard) {
  return results / fmt::format("check-shard-{}-of-{}.json", shard.index + 1, shard.count);
}

/// "check-shard-2-of-7.json" -> shard 2/7.
std::optional<Shard> shard_of_name(const std::string& name) {
  int index = 0;
  int count = 0;
  int end = 0;
  if (std::sscanf(name.c_str(), "check-shard-%d-of-%d.json%n", &index, &count, &end) != 2 ||
      end != static_cast<int>(name.size())) {
    return std::nullopt;
  }
  return Shard{index - 1, count};
}

/// What all shards saw, joined in the order of the batch's images.
Examined join_shards(const fs::path& results, const TapeBatch& batch, const MadeFrom& made_from) {
  std::map<int, std::set<int>> found;  // of how many -> which
  std::error_code error;
  for (const auto& entry : fs::directory_iterator(results, error)) {
    if (const auto shard = shard_of_name(entry.path().filename().string())) {
      found[shard->count].insert(shard->index);
    }
  }
  if (found.empty()) {
    throw InputError(results.string(),
                     "holds no shard's result; run 'rondel check --shard 1/N' to N/N first");
  }
  if (found.size() > 1) {
    throw InputError(results.string(),
                     fmt::format("holds shards of {} and of {}; delete those that are not meant",
                                 found.begin()->first,
                                 found.rbegin()->first));
  }
  const auto& [count, which] = *found.begin();
  std::map<std::string, std::size_t> index_of;
  for (std::size_t i = 0; i < batch.images.size(); ++i) index_of[batch.images[i].image] = i;
  Examined examined;
  examined.finds.resize(batch.images.size());
  examined.done.assign(batch.images.size(), 0);
  std::vector<Problem> problems;
  for (int index = 0; index < count; ++index) {
    const fs::path path = shard_path(results, {index, count});
    if (!which.contains(index)) {
      problems.push_back(
          {path.string(),
           fmt::format("is missing; run 'rondel check --shard {}/{}'", index + 1, count)});
      continue;
    }
    ShardFile file = parse_shard(read_file(path), path.string());
    if (file.made_from != made_from) {
      std::string changed;
      for (const auto& [name, hash] : made_from) {
        if (std::find(file.made_from.begin(), file.made_from.end(), std::pair{name, hash}) ==
            file.made_from.end()) {
          changed += (changed.empty() ? "" : ", ") + name;
        }
      }
      problems.push_back({path.string(),
                          fmt::format("was made from something else ({}); run 'rondel check "
                                      "--shard {}/{}' again",
                                      changed,
                                      index + 1,
                                      count)});
    } else if (file.stopped) {
      problems.push_back({path.string(),
                          fmt::format("was stopped before its end; run 'rondel check --shard "
                                      "{}/{}' again",
                                      index + 1,
                                      count)});
    }
    for (auto& [image, finds] : file.images) {
      const auto at = index_of.find(image);
      if (at == index_of.end()) continue;  // named above: made from another sheet
      examined.finds[at->second] = std::move(finds);
      examined.done[at->second] = 1;
    }
  }
  if (!problems.empty()) throw InputError(std::move(problems));
  examined.images_done =
      static_cast<int>(std::count(examined.done.begin(), examined.done.end(), char{1}));
  return examined;
}

Outcome shard_outcome(const fs::path& path, Shard shard, const Examined& examined) {
  Outcome outcome;
  outcome.document = {{"shard", {shard.index + 1, shard.count}},
                      {"images", examined.images_done},
                      {"partial", examined.stopped},
                      {"file", path.string()}};
  outcome.summary = fmt::format(
      "check: shard {} of {}: {} images looked at{}\n  kept in {}; when all shards are there: "
      "rondel check --merge\n",
      shard.index + 1,
      shard.count,
      examined.images_done,
      examined.stopped ? " (stopped before its end)" : "",
      path.string());
  outcome.status = examined.stopped ? 1 : 0;
  return outcome;
}

/// Only the images that were looked at, with their rows and finds.
void keep_done(TapeBatch& batch, Examined& examined) {
  std::vector<int> to(batch.images.size(), -1);
  TapeBatch kept;
  kept.sheet = batch.sheet;
  std::vector<std::vector<verdict::Find>> finds;
  for (std::size_t i = 0; i < batch.images.size(); ++i) {
    if (examined.done[i] == 0) continue;
    to[i] = static_cast<int>(kept.images.size());
    kept.images.push_back(std::move(batch.images[i]));
    kept.paths.push_back(std::move(batch.paths[i]));
    finds.push_back(std::move(examined.finds[i]));
  }
  for (verdict::TapeEntry& entry : batch.tape) {
    const int image = to[static_cast<std::size_t>(entry.image)];
    if (image < 0) continue;
    entry.image = image;
    kept.tape.push_back(entry);
  }
  batch = std::move(kept);
  examined.finds = std::move(finds);
}

void check_options(const CheckOptions& options) {
  if (options.shard && options.merge) {
    throw InputError("--merge", "joins finished shards; leave --shard out");
  }
  if (options.shard && options.repair) {
    throw InputError("--repair", "needs all rows; run it with --merge or without --shard");
  }
}

}  // namespace

Outcome run_check(const Workspace& workspace, const CheckOptions& options, Progress& progress) {
  check_options(options);
  const Source source = source_of(workspace, options);
  TapeBatch batch = make_batch(workspace.venue, source.frames, source.tape, source.sheet());
  const int images_in_sheet = static_cast<int>(batch.images.size());
  const Board board = open_board(workspace);
  Examiner examiner;
  examiner.detector = board.detector;
  examiner.tables = &board.tables;
  examiner.curve = board.curve.get();
  examiner.camera = workspace.rig.camera;
  examiner.pixel_noise = kBlobPx;
  mark_hidden(examiner, workspace.venue, batch);
  MadeFrom made_from = inputs(workspace, source);

  Examined examined;
  if (options.merge) {
    examined = join_shards(source.results(), batch, made_from);
  } else {
    examined = examine(examiner, batch, options.shard.value_or(Shard{}), progress);
  }
  if (options.shard) {
    ShardFile file{*options.shard, made_from, examined.stopped, {}};
    for (std::size_t i = 0; i < batch.images.size(); ++i) {
      if (examined.done[i] == 0) continue;
      file.images.emplace_back(batch.images[i].image, std::move(examined.finds[i]));
    }
    const fs::path path = shard_path(source.results(), *options.shard);
    write_file(path, shard_text(file));
    return shard_outcome(path, *options.shard, examined);
  }
  if (examined.images_done == 0) {
    throw InputError("rondel check", "stopped before the first image; nothing was written");
  }

  if (examined.stopped) keep_done(batch, examined);
  CheckReport report;
  report.venue = &workspace.venue;
  report.batch = &batch;
  report.curve = board.curve.get();
  report.finds = std::move(examined.finds);
  report.partial = examined.stopped;
  report.images_in_sheet = images_in_sheet;
  report.tables_identity = fmt::format("{:08x}", board.tables.identity);
  report.verdict = verdict::judge(workspace.venue, batch.images, batch.tape, report.finds);
  if (report.partial) {
    // A part that held says nothing about the rest.
    report.verdict.accepted = false;
    report.verdict.reasons.insert(report.verdict.reasons.begin(),
                                  fmt::format("Stopped after {} of {} images; what follows holds "
                                              "for these only.",
                                              batch.images.size(),
                                              images_in_sheet));
    made_from.emplace_back("partial",
                           fmt::format("{} of {}", batch.images.size(), images_in_sheet));
  }
  std::shared_ptr<const verdict::KnockModel> model;
  if (board.curve) model = knock_model(board.curve, workspace.rig);
  const Causes causes =
      find_causes(workspace.venue, batch, report.finds, report.verdict, model.get(), examiner);
  report.causes = causes.causes;
  report.hypotheses = causes.hypotheses;

  Outcome outcome;
  outcome.document = check_document(report);
  outcome.summary = check_summary(report);
  outcome.status = report.verdict.accepted ? 0 : 1;
  const fs::path results = source.results();
  if (options.repair) {
    const Repair repair = try_repair(workspace, board, report, causes, progress);
    outcome.document["repair"] = repair.document;
    outcome.summary += repair.summary;
  }
  write_file(results / "check.csv", check_csv(report));
  write_file(results / "check.xml", check_junit(report));
  write_file(results / "check.json", check_json(report, made_from));
  if (source.other) {
    outcome.summary += fmt::format(
        "  report   {}\n",
        report::write_check_report(workspace, {source.folder, source.frames, source.tape})
            .string());
  }
  return outcome;
}

Outcome check_step(const Workspace& workspace, Progress& progress) {
  return run_check(workspace, {}, progress);
}

}  // namespace rondel::app
