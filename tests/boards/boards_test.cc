// The emitted code, compiled by the compilers and run by the machines it is for: byte for byte what
// the host computes. Each test says so and skips where its tools are not installed.
#include <gmock/gmock.h>
#include <gtest/gtest.h>
#include <unistd.h>

#include <cstdlib>
#include <filesystem>
#include <fstream>
#include <iterator>
#include <set>

#include "calib/base/file.h"
#include "tests/boards/samples.h"
#include "tools/firmware/emit.h"
#ifdef RONDEL_SIMAVR
#include "tests/boards/avr_run.h"
#endif

namespace rondel::boards {
namespace {

namespace fs = std::filesystem;
using ::testing::HasSubstr;

const fs::path kHere = fs::path(RONDEL_SOURCE_DIR) / "tests" / "boards";

bool have(const std::string& tool) {
  return std::system(("command -v " + tool + " >/dev/null 2>&1").c_str()) == 0;
}

/// A folder of its own with the emitted files of `tables`.
class Folder {
 public:
  explicit Folder(const link::BoardTables& tables)
      : path_(fs::temp_directory_path() /
              ("rondel-boards-" + std::to_string(getpid()) + "-" + std::to_string(count++))) {
    write_file(path_ / "camera.h", firmware::camera_header(tables));
    write_file(path_ / "drive.h", firmware::drive_header(tables));
    write_file(path_ / "t.py", firmware::micropython_module(tables));
  }
  Folder(const Folder&) = delete;
  Folder& operator=(const Folder&) = delete;
  ~Folder() { fs::remove_all(path_); }
  [[nodiscard]] const fs::path& path() const { return path_; }
  /// What `command` says, run in the folder; fails the test where it fails or warns.
  [[nodiscard]] bool run(const std::string& command) const {
    const std::string log = (path_ / "log").string();
    const int status =
        std::system(("cd '" + path_.string() + "' && " + command + " 2>'" + log + "'").c_str());
    const std::string said = read_file(log);
    EXPECT_EQ(status, 0) << command << "\n" << said;
    return status == 0;
  }
  [[nodiscard]] std::vector<std::uint8_t> bytes(const std::string& name) const {
    const std::string all = read_file(path_ / name);
    return {all.begin(), all.end()};
  }

 private:
  inline static int count = 0;
  fs::path path_;
};

struct Kind {
  const char* name;
  link::BoardTables tables;
};

/// One of every layout, plan and fold that code is emitted for.
const std::vector<Kind>& kinds() {
  static const std::vector<Kind> kAll = [] {
    LinkSpec plain;
    LinkSpec fine;
    fine.bearing_codes = 250;
    fine.range_bits = 9;
    fine.check = CheckByte::crc8;
    LinkSpec coarse;
    coarse.bearing_codes = 30;
    coarse.range_bits = 4;
    coarse.check = CheckByte::none;
    std::vector<Kind> all;
    all.push_back({"straight", tables_of(0.0, 0.0, 90.0, plain, true)});
    all.push_back({"tilted", tables_of(1.0, 4.0, 0.0, plain, true)});
    all.push_back({"turned, two-byte codes", tables_of(1.0, 4.0, 37.0, fine, false)});
    all.push_back({"few codes", tables_of(1.0, 4.0, -120.0, coarse, false)});
    all.push_back({"sectors", with_sectors(all[1].tables)});
    all.push_back({"grid", with_grid(all[0].tables)});
    all.push_back({"32 bit", with_wide(all[1].tables)});
    return all;
  }();
  return kAll;
}

constexpr const char* kStrict = " -std=c99 -pedantic -Wall -Wextra -Wconversion -Werror -I. ";

TEST(Boards, EveryKindOfLayoutIsTested) {
  std::set<link::Straightening> seen;
  for (const Kind& kind : kinds()) {
    for (const link::RangeLayout& layout : kind.tables.layouts) seen.insert(layout.kind);
  }
  EXPECT_EQ(seen.size(), 4U);
}

void test_host(const char* compiler) {
  if (!have(compiler)) GTEST_SKIP() << compiler << " is not installed";
  for (const Kind& kind : kinds()) {
    SCOPED_TRACE(kind.name);
    const Folder folder(kind.tables);
    ASSERT_TRUE(folder.run(std::string(compiler) + kStrict + "-O1 '" +
                           (kHere / "board_all.c").string() + "' -o all && ./all >out"));
    EXPECT_TRUE(folder.bytes("out") == expect_all(kind.tables)) << "reports differ from the host's";
  }
}
TEST(Boards, HostGcc) { test_host("gcc"); }
TEST(Boards, HostClang) { test_host("clang"); }

void test_cortex(const char* cpu, const char* machine) {
  if (!have("arm-none-eabi-gcc")) GTEST_SKIP() << "arm-none-eabi-gcc is not installed";
  if (!have("qemu-system-arm")) GTEST_SKIP() << "qemu-system-arm is not installed";
  for (const Kind& kind : kinds()) {
    SCOPED_TRACE(kind.name);
    const Folder folder(kind.tables);
    ASSERT_TRUE(folder.run("arm-none-eabi-gcc -mthumb -Os -ffreestanding -nostartfiles -mcpu=" +
                           std::string(cpu) + kStrict + "-T '" + (kHere / "cortex.ld").string() +
                           "' '" + (kHere / "board_all.c").string() + "' -lc -lgcc -o all.elf"));
    ASSERT_TRUE(folder.run("timeout 60 qemu-system-arm -M " + std::string(machine) +
                           " -display none -monitor none -serial none -semihosting-config "
                           "enable=on,target=native -kernel all.elf >out"));
    EXPECT_TRUE(folder.bytes("out") == expect_all(kind.tables)) << "reports differ from the host's";
  }
}
TEST(Boards, CortexM4) { test_cortex("cortex-m4", "mps2-an386"); }
TEST(Boards, CortexM0) { test_cortex("cortex-m0", "microbit"); }

TEST(Boards, Avr) {
#ifdef RONDEL_SIMAVR
  if (!have("avr-gcc")) GTEST_SKIP() << "avr-gcc is not installed";
  constexpr int kSamples = 5000;
  for (const Kind& kind : kinds()) {
    if (kind.tables.link.range_bits > 7) continue;  // more tables than an ATmega328P has flash for
    SCOPED_TRACE(kind.name);
    const Folder folder(kind.tables);
    ASSERT_TRUE(folder.run("avr-gcc -mmcu=atmega328p -Os" + std::string(kStrict) + "'" +
                           (kHere / "board_avr.c").string() + "' -o avr.elf"));
    const AvrRun run = run_avr(folder.path() / "avr.elf", 200000000ULL);
    EXPECT_TRUE(run.ended);
    EXPECT_EQ(run.encode_cycles.size(), static_cast<std::size_t>(kSamples));
    EXPECT_TRUE(run.bytes == expect_sample(kind.tables, kSamples)) << "differs from the host";
  }
#else
  GTEST_SKIP() << "built without libsimavr-dev and libelf-dev";
#endif
}

TEST(Boards, Python) {
  if (!have("python3"))
    GTEST_SKIP() << "PYTHONPATH=. PYTHONDONTWRITEBYTECODE=1 python3 is not installed";
  for (const Kind& kind : kinds()) {
    SCOPED_TRACE(kind.name);
    const Folder folder(kind.tables);
    // All pixels of one kind; every 20th row of the others, for time.
    const int step = std::string(kind.name) == "tilted" ? 1 : 20;
    ASSERT_TRUE(folder.run("PYTHONPATH=. PYTHONDONTWRITEBYTECODE=1 python3 '" +
                           (kHere / "board_all.py").string() + "' 320 240 " + std::to_string(step) +
                           " >out"));
    const std::vector<std::uint8_t> all = expect_all(kind.tables);
    const auto row = static_cast<std::ptrdiff_t>(all.size() / 240);
    std::vector<std::uint8_t> want;
    for (std::ptrdiff_t v = 0; v < 240; v += step) {
      want.insert(want.end(), all.begin() + v * row, all.begin() + (v + 1) * row);
    }
    EXPECT_TRUE(folder.bytes("out") == want) << "reports differ from the host's";
  }
}

TEST(Boards, FilesThatWereNotMadeTogetherDoNotCompile) {
  if (!have("gcc")) GTEST_SKIP() << "gcc is not installed";
  const Folder folder(kinds()[0].tables);
  write_file(folder.path() / "drive.h", firmware::drive_header(kinds()[1].tables));
  const std::string command = "cd '" + folder.path().string() + "' && gcc -fsyntax-only -I. '" +
                              (kHere / "board_all.c").string() + "' 2>log";
  EXPECT_NE(std::system(command.c_str()), 0);
  EXPECT_THAT(read_file(folder.path() / "log"), HasSubstr("were not made together"));
}

}  // namespace
}  // namespace rondel::boards
