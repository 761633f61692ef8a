#include <fmt/core.h>
#include <sys/resource.h>

#include <algorithm>
#include <atomic>
#include <chrono>
#include <thread>
#include <vector>

#include "calib/base/problem.h"
#include "tools/rondel/board.h"
#include "tools/rondel/steps/check_batch.h"
#include "vision/frames/load.h"

// The time of checking a batch's images, as the boards would, over the time of only decoding them,
// both on all cores, taken in turns. Usage: bench_check_bench VENUE BATCH [ROUNDS]; VENUE has its
// results. Also prints the most memory the process has held, MiB: run it on batches of different
// lengths.
namespace {

struct Times {
  double wall_s = 0.0;
  double cpu_s = 0.0;
};

double cpu_now_s() {
  rusage used{};
  getrusage(RUSAGE_SELF, &used);
  const auto seconds = [](const timeval& t) {
    return static_cast<double>(t.tv_sec) + 1e-6 * static_cast<double>(t.tv_usec);
  };
  return seconds(used.ru_utime) + seconds(used.ru_stime);
}

template <class Work>
Times timed(const Work& work) {
  const double cpu = cpu_now_s();
  const auto start = std::chrono::steady_clock::now();
  work();
  const std::chrono::duration<double> wall = std::chrono::steady_clock::now() - start;
  return {wall.count(), cpu_now_s() - cpu};
}

void decode_all(const rondel::app::TapeBatch& batch, const rondel::CameraSpec& camera) {
  std::atomic<std::size_t> next = 0;
  const auto work = [&] {
    for (std::size_t i = next++; i < batch.paths.size(); i = next++) {
      (void)rondel::vision::load_image(batch.paths[i], camera);
    }
  };
  std::vector<std::thread> others;
  for (unsigned t = 1; t < std::max(1U, std::thread::hardware_concurrency()); ++t) {
    others.emplace_back(work);
  }
  work();
  for (std::thread& other : others) other.join();
}

double median(std::vector<double> values) {
  std::sort(values.begin(), values.end());
  return values[values.size() / 2];
}

}  // namespace

int main(int count, char** words) {
  using namespace rondel::app;
  if (count < 3) {
    fmt::print("usage: bench_check_bench VENUE BATCH [ROUNDS]\n");
    return 2;
  }
  try {
    const Workspace workspace = open_workspace(words[1]);
    const Batch source = open_batch(workspace, words[2]);
    const TapeBatch batch = make_batch(workspace.venue, source.frames, source.tape, "tape.csv");
    const Board board = open_board(workspace);
    const Examiner examiner{
        board.detector, &board.tables, board.curve.get(), workspace.rig.camera, 0.3};
    rondel::Progress quiet;
    std::vector<double> wall;
    std::vector<double> cpu;
    const int rounds = count > 3 ? std::max(1, std::atoi(words[3])) : 7;
    for (int r = 0; r < rounds; ++r) {
      const Times decoded = timed([&] { decode_all(batch, workspace.rig.camera); });
      const Times checked = timed([&] { (void)examine(examiner, batch, {}, quiet); });
      wall.push_back(checked.wall_s / decoded.wall_s);
      cpu.push_back(checked.cpu_s / decoded.cpu_s);
      fmt::print(
          "{} images: decode {:.3f} s, check {:.3f} s wall ({:.2f} x); {:.3f} s, {:.3f} s "
          "of processor ({:.2f} x)\n",
          batch.images.size(),
          decoded.wall_s,
          checked.wall_s,
          wall.back(),
          decoded.cpu_s,
          checked.cpu_s,
          cpu.back());
    }
    rusage used{};
    getrusage(RUSAGE_SELF, &used);
    fmt::print("median {:.3f} x wall, {:.3f} x processor; at most {:.1f} MiB\n",
               median(wall),
               median(cpu),
               static_cast<double>(used.ru_maxrss) / 1024.0);
  } catch (const rondel::InputError& error) {
    fmt::print("{}\n", error.what());
    return 2;
  }
  return 0;
}
