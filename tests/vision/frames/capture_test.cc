#include "vision/frames/capture.h"

#include <gmock/gmock.h>

#include <filesystem>
#include <opencv2/videoio.hpp>

#include "calib/base/file.h"

namespace rondel::vision {
namespace {

const std::filesystem::path kFolder = std::filesystem::path(testing::TempDir()) / "capture_test";

/// A video of `count` frames at 10 frames a second; frame i is grey of value 10 * i.
std::string video(int count, int width_px = 64, int height_px = 48) {
  std::filesystem::create_directories(kFolder);
  const std::string name = (kFolder / std::to_string(count).append(".avi")).string();
  cv::VideoWriter writer(name,
                         cv::CAP_OPENCV_MJPEG,
                         cv::VideoWriter::fourcc('M', 'J', 'P', 'G'),
                         10.0,
                         {width_px, height_px});
  for (int i = 0; i < count; ++i) {
    writer.write(cv::Mat(height_px, width_px, CV_8UC3, cv::Scalar::all(10.0 * i)));
  }
  return name;
}

std::string refusal(const std::string& source, FrameSize size) {
  try {
    const Capture capture(source, size);
  } catch (const InputError& error) {
    return error.what();
  }
  return "accepted";
}

/// Which frame of `video` this is: the grey survives compression to well within 5.
int number_of(const cv::Mat& frame) { return static_cast<int>(cv::mean(frame)[0] / 10.0 + 0.5); }

TEST(Capture, TakesFramesByTheVideosOwnTime) {
  Capture capture(video(10), {64, 48});
  Progress silent;
  std::vector<int> taken;
  for (int i = 0; const auto frame = capture.next(0.25 * i, silent); ++i) {
    taken.push_back(number_of(*frame));
  }
  // At 0, 0.25, 0.5, 0.75 s and at 10 frames a second: the first frame at that time or later.
  EXPECT_THAT(taken, testing::ElementsAre(0, 3, 5, 8));
}

TEST(Capture, TakesEveryFrameWhenAsked) {
  Capture capture(video(6), {64, 48});
  Progress silent;
  std::vector<int> taken;
  while (const auto frame = capture.next(0.0, silent)) taken.push_back(number_of(*frame));
  EXPECT_THAT(taken, testing::ElementsAre(0, 1, 2, 3, 4, 5));
}

TEST(Capture, RefusesInOneLine) {
  EXPECT_EQ(refusal(video(3), {320, 240}),
            video(3) + ": gives frames of 64 x 48 pixels; rig.yaml says 320 x 240");
  const std::string text = (kFolder / "text.mp4").string();
  write_file(text, "this is no video");
  EXPECT_EQ(refusal(text, {64, 48}),
            text +
                ": is no video that can be read; check the file, or take its frames as images in "
                "a folder");
  const std::string cut = (kFolder / "cut.avi").string();
  write_file(cut, read_file(video(3)).substr(0, 200));
  EXPECT_EQ(refusal(cut, {64, 48}),
            cut +
                ": is no video that can be read; check the file, or take its frames as images in "
                "a folder");
  EXPECT_EQ(refusal("/dev/null", {64, 48}),
            "/dev/null: cannot be opened as a camera; is another program using it, and are you in "
            "the group 'video'?");
  EXPECT_EQ(refusal("hhtp://camera/1", {64, 48}),
            "hhtp://camera/1: is no stream address; did you mean 'http'?");
  // Port 9 of this machine: nobody answers there.
  EXPECT_EQ(refusal("http://127.0.0.1:9/stream", {64, 48}),
            "http://127.0.0.1:9/stream: gives no pictures; check the address, the network and the "
            "camera's stream settings");
}

TEST(KindOfSource, GoesByWhatIsThere) {
  EXPECT_EQ(kind_of_source(video(3)), SourceKind::video);
  EXPECT_EQ(kind_of_source(kFolder.string()), SourceKind::folder);
  EXPECT_EQ(kind_of_source("/dev/null"), SourceKind::device);
  EXPECT_EQ(kind_of_source("rtsp://camera/1"), SourceKind::stream);
  EXPECT_EQ(kind_of_source((kFolder / "nothing").string()), SourceKind::missing);
  write_file(kFolder / "a.png", "x");
  EXPECT_EQ(kind_of_source((kFolder / "a.png").string()), SourceKind::image);
}

}  // namespace
}  // namespace rondel::vision
