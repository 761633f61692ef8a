// Loading tables over a bad line: the computer's side against the emitted receiver, compiled as the
// board would compile it.
#include "tools/firmware/transfer.h"

#include <dlfcn.h>
#include <gtest/gtest.h>
#include <unistd.h>

#include <algorithm>
#include <cstdlib>
#include <deque>
#include <filesystem>
#include <random>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "calib/link/checksums.h"
#include "tools/firmware/emit.h"

namespace rondel::firmware {
namespace {

namespace fs = std::filesystem;
using Bytes = std::vector<std::uint8_t>;

// Cheshire and Baker (1999): at most one byte in 254; lengths computed from the paper's rule.
TEST(Stuffing, HasThePapersLengths) {
  for (const auto& [plain, stuffed] : {std::pair{0, 1},
                                       std::pair{1, 2},
                                       std::pair{253, 254},
                                       std::pair{254, 255},
                                       std::pair{255, 257},
                                       std::pair{508, 510}}) {
    EXPECT_EQ(stuff(Bytes(static_cast<std::size_t>(plain), 7)).size(),
              static_cast<std::size_t>(stuffed))
        << plain;
  }
}

TEST(Stuffing, IsUndoneAndHasNoZeros) {
  std::mt19937 random(3);
  for (int trial = 0; trial < 2000; ++trial) {
    Bytes bytes(random() % 600);
    const unsigned zeros = random() % 8;  // of 8
    for (std::uint8_t& b : bytes) {
      b = random() % 8 < zeros ? std::uint8_t{0} : static_cast<std::uint8_t>(random());
    }
    const Bytes stuffed = stuff(bytes);
    EXPECT_EQ(std::count(stuffed.begin(), stuffed.end(), 0), 0);
    const auto back = unstuff(stuffed);
    ASSERT_TRUE(back.has_value());
    EXPECT_EQ(*back, bytes);
  }
  EXPECT_FALSE(unstuff(Bytes{5, 1, 2}).has_value());
}

/// The receiver's C around a state of its own; loaded once, one board at a time.
class Board {
 public:
  Board() {
    folder_ = fs::temp_directory_path() / ("rondel-receiver-" + std::to_string(getpid()));
    write_file(folder_ / "receiver.h", receiver_header("t"));
    write_file(folder_ / "board.c",
               "#include \"receiver.h\"\n"
               "static t_receiver r;\n"
               "void start(void (*w)(uint32_t, const uint8_t *, uint8_t), void (*s)(uint8_t));\n"
               "void start(void (*w)(uint32_t, const uint8_t *, uint8_t), void (*s)(uint8_t)) {\n"
               "  static const t_receiver none;\n"
               "  r = none; r.write = w; r.send = s;\n"
               "}\n"
               "uint8_t take(uint8_t byte);\n"
               "uint8_t take(uint8_t byte) { return t_receive(&r, byte); }\n"
               "unsigned size(void);\n"
               "unsigned size(void) { return (unsigned)sizeof r; }\n");
    const std::string command =
        "cd '" + folder_.string() +
        "' && gcc -std=c99 -pedantic -Wall -Wextra -Wconversion -Werror -O1 -shared -fPIC board.c "
        "-o board.so 2>&1";
    built_ = std::system(command.c_str()) == 0;
    if (!built_) return;
    code_ = dlopen((folder_ / "board.so").c_str(), RTLD_NOW);
    start_ = reinterpret_cast<Start>(dlsym(code_, "start"));
    take_ = reinterpret_cast<Take>(dlsym(code_, "take"));
    size_ = reinterpret_cast<Size>(dlsym(code_, "size"));
  }
  Board(const Board&) = delete;
  Board& operator=(const Board&) = delete;
  ~Board() {
    if (code_ != nullptr) dlclose(code_);
    fs::remove_all(folder_);
  }

  [[nodiscard]] bool built() const { return built_; }
  [[nodiscard]] unsigned state_bytes() const { return size_(); }

  /// Power on, with `tables` in use.
  void restart(const Bytes& tables) {
    in_use = tables;
    spare.assign(65536, 0xEE);
    answers.clear();
    the_board = this;
    start_(
        [](std::uint32_t offset, const std::uint8_t* bytes, std::uint8_t count) {
          std::copy(bytes, bytes + count, the_board->spare.begin() + offset);
        },
        [](std::uint8_t byte) { the_board->answers.push_back(byte); });
  }
  void feed(std::uint8_t byte, std::size_t image_bytes) {
    if (take_(byte) == 0) return;
    in_use.assign(spare.begin(), spare.begin() + static_cast<std::ptrdiff_t>(image_bytes));
    ++accepted;
  }

  Bytes in_use;
  Bytes spare;
  std::deque<std::uint8_t> answers;
  int accepted = 0;

 private:
  using Start = void (*)(void (*)(std::uint32_t, const std::uint8_t*, std::uint8_t),
                         void (*)(std::uint8_t));
  using Take = std::uint8_t (*)(std::uint8_t);
  using Size = unsigned (*)();
  inline static Board* the_board = nullptr;
  fs::path folder_;
  bool built_ = false;
  void* code_ = nullptr;
  Start start_ = nullptr;
  Take take_ = nullptr;
  Size size_ = nullptr;
};

/// What may happen to a byte on its way; each with its probability.
struct Faults {
  double bit_error = 0.0;  ///< per bit
  double dropped = 0.0;    ///< per byte
  double doubled = 0.0;
  double swapped = 0.0;       ///< with the one after it
  long cut_after_bytes = -1;  ///< the cable is out from here on
};

/// A line to the board, with faults both ways. Time is what the bytes take.
class BadLine final : public Line {
 public:
  BadLine(Board& board, std::size_t image_bytes, Faults faults, std::uint32_t seed)
      : board_(board), image_bytes_(image_bytes), faults_(faults), random_(seed) {}

  void write(std::span<const std::uint8_t> bytes) override {
    for (const std::uint8_t byte : spoiled(bytes)) board_.feed(byte, image_bytes_);
  }
  std::optional<std::uint8_t> read(double /*timeout_s*/) override {
    if (back_.empty()) {
      const Bytes said(board_.answers.begin(), board_.answers.end());
      board_.answers.clear();
      for (const std::uint8_t byte : spoiled(said)) back_.push_back(byte);
    }
    if (back_.empty()) return std::nullopt;
    const std::uint8_t byte = back_.front();
    back_.pop_front();
    return byte;
  }
  long carried = 0;

 private:
  bool chance(double p) { return p > 0.0 && std::uniform_real_distribution<>()(random_) < p; }
  Bytes spoiled(std::span<const std::uint8_t> plain) {
    Bytes out;
    for (std::uint8_t byte : plain) {
      ++carried;
      if (faults_.cut_after_bytes >= 0 && carried > faults_.cut_after_bytes) continue;
      for (unsigned bit = 0; bit < 8; ++bit) {
        if (chance(faults_.bit_error)) byte = static_cast<std::uint8_t>(byte ^ (1U << bit));
      }
      if (chance(faults_.dropped)) continue;
      out.push_back(byte);
      if (chance(faults_.doubled)) out.push_back(byte);
      if (out.size() > 1 && chance(faults_.swapped)) std::swap(out.back(), out[out.size() - 2]);
    }
    return out;
  }

  Board& board_;
  std::size_t image_bytes_;
  Faults faults_;
  std::mt19937 random_;
  std::deque<std::uint8_t> back_;
};

/// Bytes that look like a packed table to both sides: an identity at its place.
Bytes image_of(std::size_t size, std::mt19937& random) {
  Bytes bytes(size);
  for (std::uint8_t& b : bytes) {
    b = random() % 4 == 0 ? std::uint8_t{0} : static_cast<std::uint8_t>(random());
  }
  return bytes;
}

class TransferTest : public ::testing::Test {
 protected:
  static void SetUpTestSuite() { board_ = new Board; }
  static void TearDownTestSuite() { delete board_; }
  static Board& board() { return *board_; }
  void SetUp() override { ASSERT_TRUE(board().built()) << "the receiver does not compile"; }
  Progress progress_;

 private:
  inline static Board* board_ = nullptr;
};

TEST_F(TransferTest, TheReceiversStateIsSmall) { EXPECT_LE(board().state_bytes(), 256U); }

TEST_F(TransferTest, AGoodLineNeedsNoRepeatAndTheBytesOfThePlan) {
  std::mt19937 random(5);
  for (const std::size_t size : {16U, 64U, 65U, 1008U, 20000U}) {
    const Bytes image = image_of(size, random);
    board().restart({1, 2, 3});
    BadLine line(board(), size, {}, 1);
    const Transfer transfer = send_image(line, image, 115200, 3, "port", progress_);
    EXPECT_TRUE(transfer.accepted);
    EXPECT_EQ(transfer.repeats, 0);
    EXPECT_EQ(board().in_use, image);
    EXPECT_NEAR(static_cast<double>(line.carried) / wire_bytes(size), 1.0, 0.1) << size;
  }
}

TEST_F(TransferTest, BadLinesNeverPutAWrongTableInUse) {
  int done = 0;
  int failed = 0;
  for (std::uint32_t trial = 0; trial < 2000; ++trial) {
    std::mt19937 random(trial);
    const Bytes old = image_of(100, random);
    const Bytes image = image_of(16 + random() % 600, random);
    board().restart(old);
    Faults faults;
    faults.bit_error = random() % 4 == 0 ? 0.0 : 1e-3;
    faults.dropped = random() % 2 == 0 ? 0.0 : 2e-3;
    faults.doubled = random() % 2 == 0 ? 0.0 : 2e-3;
    faults.swapped = random() % 2 == 0 ? 0.0 : 2e-3;
    if (random() % 4 == 0) faults.cut_after_bytes = static_cast<long>(random() % 900);
    BadLine line(board(), image.size(), faults, trial);
    try {
      const Transfer transfer = send_image(line, image, 9600, 20, "port", progress_);
      EXPECT_TRUE(transfer.accepted);
      EXPECT_EQ(board().in_use, image) << "trial " << trial;
      ++done;
    } catch (const InputError&) {
      // The board may have taken it with only its last answer lost; then it is the right one.
      EXPECT_TRUE(board().in_use == old || board().in_use == image) << "trial " << trial;
      ++failed;
    }
  }
  RecordProperty("done", done);
  RecordProperty("failed", failed);
  EXPECT_GT(done, 1000);
  EXPECT_GT(failed, 100) << "the cuts should have been felt";
}

TEST_F(TransferTest, GoesOnWhereTheCableWasPulled) {
  std::mt19937 random(9);
  const Bytes image = image_of(3000, random);
  board().restart({9});
  BadLine cut(board(), image.size(), {.cut_after_bytes = 2000}, 1);
  EXPECT_THROW((void)send_image(cut, image, 9600, 3, "port", progress_), InputError);
  EXPECT_EQ(board().in_use, Bytes{9});
  BadLine whole(board(), image.size(), {}, 1);
  EXPECT_TRUE(send_image(whole, image, 9600, 3, "port", progress_).accepted);
  EXPECT_EQ(board().in_use, image);
  EXPECT_LT(whole.carried, 0.6 * wire_bytes(image.size())) << "it began again";
}

TEST_F(TransferTest, AnotherImageAfterACutStartsAfresh) {
  std::mt19937 random(11);
  const Bytes first = image_of(2000, random);
  const Bytes second = image_of(2000, random);
  board().restart({9});
  BadLine cut(board(), first.size(), {.cut_after_bytes = 1500}, 1);
  EXPECT_THROW((void)send_image(cut, first, 9600, 3, "port", progress_), InputError);
  BadLine whole(board(), second.size(), {}, 1);
  EXPECT_TRUE(send_image(whole, second, 9600, 3, "port", progress_).accepted);
  EXPECT_EQ(board().in_use, second);
}

}  // namespace
}  // namespace rondel::firmware
