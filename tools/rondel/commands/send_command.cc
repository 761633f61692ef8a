#include <fmt/format.h>

#include <chrono>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "calib/link/board_tables.h"
#include "calib/link/link_plan.h"
#include "tools/rondel/commands/command.h"
#include "tools/rondel/serial_port.h"

namespace rondel::app {
namespace {

/// Adds the time left to what the transfer reports.
class TimeLeft : public Progress {
 public:
  explicit TimeLeft(Progress& to) : to_(to) {}
  void at(std::string_view what, int done, int total) override {
    const std::chrono::duration<double> spent = std::chrono::steady_clock::now() - start_;
    if (first_ < 0) first_ = done;
    const int sent = done - first_;
    to_.at(sent > 0 ? fmt::format("{} ({:.0f} s left)", what, spent.count() * (total - done) / sent)
                    : std::string(what),
           done,
           total);
  }
  [[nodiscard]] bool cancelled() const override { return to_.cancelled(); }

 private:
  Progress& to_;
  std::chrono::steady_clock::time_point start_ = std::chrono::steady_clock::now();
  int first_ = -1;  // a transfer that goes on does not begin at block 0
};

}  // namespace

Outcome send_command(const Arguments& arguments, Progress& progress) {
  constexpr int kTries = 10;
  const Workspace workspace = open_workspace(arguments.words.at(0));
  const std::string& device = arguments.words.at(1);
  const std::string path =
      (workspace.results() / "tables" / (workspace.venue.prefix + ".bin")).string();
  const std::string bytes = read_file(path);
  const std::span<const std::uint8_t> image(reinterpret_cast<const std::uint8_t*>(bytes.data()),
                                            bytes.size());
  const link::BoardTables tables = link::unpack(image, path);
  const int baud = arguments.whole_number("--baud").value_or(workspace.venue.link.baud);
  SerialPort port(device, baud);
  const double planned_s = link::wire_s(baud, firmware::wire_bytes(image.size()));
  progress.note(fmt::format("{} bytes at {} baud: about {:.1f} s", image.size(), baud, planned_s));
  TimeLeft with_time(progress);
  const auto start = std::chrono::steady_clock::now();
  const firmware::Transfer transfer =
      firmware::send_image(port, image, baud, kTries, device, with_time);
  const std::chrono::duration<double> spent = std::chrono::steady_clock::now() - start;
  Outcome outcome;
  outcome.document["identity"] = fmt::format("{:08X}", tables.identity);
  outcome.document["accepted"] = transfer.accepted;
  outcome.document["bytes"] = image.size();
  outcome.document["frames"] = transfer.frames;
  outcome.document["repeats"] = transfer.repeats;
  outcome.document["seconds"] = spent.count();
  outcome.document["planned_seconds"] = planned_s;
  outcome.summary = fmt::format(
      "The board has taken tables {:08X}: {} bytes in {:.1f} s, {} of {} frames sent again",
      tables.identity,
      image.size(),
      spent.count(),
      transfer.repeats,
      transfer.frames);
  return outcome;
}

}  // namespace rondel::app
