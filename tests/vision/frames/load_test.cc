#include "vision/frames/load.h"

#include <gmock/gmock.h>

#include <opencv2/imgcodecs.hpp>
#include <random>

#include "calib/base/file.h"

namespace rondel::vision {
namespace {

using testing::ElementsAre;
using testing::HasSubstr;

cv::Mat picture(int width_px = 40, int height_px = 30) {
  cv::Mat bgr(height_px, width_px, CV_8UC3);
  std::mt19937 rng{3};
  for (int v = 0; v < height_px; ++v) {
    for (int u = 0; u < width_px; ++u) {
      bgr.at<cv::Vec3b>(v, u) = {static_cast<unsigned char>(6 * u),
                                 static_cast<unsigned char>(8 * v),
                                 static_cast<unsigned char>(rng() & 255U)};
    }
  }
  return bgr;
}

std::string encoded(const std::string& ending, const cv::Mat& image = picture()) {
  std::vector<unsigned char> bytes;
  cv::imencode(ending, image, bytes);
  return {bytes.begin(), bytes.end()};
}

std::string refusal(std::string_view bytes, const std::string& name, FrameSize size = {}) {
  try {
    (void)decode_image(bytes, name, size);
  } catch (const InputError& error) {
    return error.what();
  }
  return "accepted";
}

bool same(const cv::Mat& a, const cv::Mat& b) {
  return a.size() == b.size() && a.type() == b.type() && cv::norm(a, b, cv::NORM_INF) == 0.0;
}

TEST(DecodeImage, LosslessFormatsGiveTheirPixelsBack) {
  for (const char* ending : {".png", ".bmp", ".ppm"}) {
    EXPECT_TRUE(same(decode_image(encoded(ending), std::string("a") + ending, {40, 30}), picture()))
        << ending;
  }
  EXPECT_TRUE(same(decode_image(encoded(".png"), "A.PNG"), picture())) << "endings in capitals";
}

TEST(DecodeImage, GreyAndDeepImagesBecomeBgr) {
  cv::Mat grey(30, 40, CV_8UC1, cv::Scalar(77));
  const cv::Mat read = decode_image(encoded(".png", grey), "a.png");
  EXPECT_TRUE(same(read, cv::Mat(30, 40, CV_8UC3, cv::Scalar(77, 77, 77))));
  cv::Mat deep(30, 40, CV_16UC3, cv::Scalar(0x1234, 0x5678, 0x9abc));
  const cv::Mat top = decode_image(encoded(".png", deep), "a.png");
  EXPECT_EQ(top.type(), CV_8UC3);
}

TEST(DecodeImage, JpegIsReadAndItsRotationTagNotFollowed) {
  EXPECT_EQ(decode_image(encoded(".jpg"), "a.jpeg").size(), cv::Size(40, 30));
  // An EXIF block (CIPA DC-008) that says orientation 6, "turn by 90 degrees", behind the start.
  const std::string exif(
      "\xff\xe1\x00\x22"
      "Exif\0\0MM\0*\0\0\0\x08\0\x01\x01\x12\0\x03\0\0\0\x01\0\x06\0\0\0\0\0\0",
      36);
  std::string bytes = encoded(".jpg");
  bytes.insert(2, exif);
  const cv::Mat turned =
      cv::imdecode(std::vector<char>(bytes.begin(), bytes.end()), cv::IMREAD_COLOR);
  ASSERT_EQ(turned.size(), cv::Size(30, 40)) << "the tag is there and works";
  EXPECT_EQ(decode_image(bytes, "a.jpg").size(), cv::Size(40, 30));
}

TEST(DecodeImage, RefusesWhatIsEmptyRenamedOrNoImage) {
  EXPECT_EQ(refusal("", "f/a.png"), "f/a.png: is empty; capture it again");
  EXPECT_EQ(refusal("hello, this is text", "a.jpg"),
            "a.jpg: is no JPEG image, whatever its name says; save it as PNG, JPEG, BMP or PPM");
  EXPECT_EQ(refusal(encoded(".png"), "a.jpg"),
            "a.jpg: holds a PNG image; its name's ending must say so");
  EXPECT_EQ(refusal(encoded(".jpg"), "a.bmp"),
            "a.bmp: holds a JPEG image; its name's ending must say so");
}

TEST(DecodeImage, RefusesEveryTruncation) {
  for (const char* ending : {".png", ".jpg", ".bmp", ".ppm"}) {
    const std::string name = std::string("a") + ending;
    const std::string whole = encoded(ending);
    ASSERT_EQ(refusal(whole, name), "accepted");
    for (std::size_t kept = 0; kept < whole.size(); kept += 1 + whole.size() / 97) {
      EXPECT_NE(refusal(whole.substr(0, kept), name), "accepted") << ending << " cut to " << kept;
    }
    EXPECT_EQ(refusal(whole.substr(0, whole.size() * 2 / 3), name),
              name + ": is cut short; copy or capture it again");
  }
}

TEST(DecodeImage, RefusesAFileWhosePixelsAreDamaged) {
  std::string bytes = encoded(".png");
  const std::size_t data = bytes.find("IDAT");
  for (std::size_t i = data + 4; i < data + 24; ++i) bytes[i] = '\x55';
  EXPECT_EQ(refusal(bytes, "a.png"),
            "a.png: is damaged and cannot be decoded; copy or capture it again");
}

TEST(DecodeImage, RefusesGiantsByTheirHeaderAlone) {
  const auto big_endian = [](std::uint32_t n) {
    return std::string{static_cast<char>(n >> 24),
                       static_cast<char>(n >> 16),
                       static_cast<char>(n >> 8),
                       static_cast<char>(n)};
  };
  std::string png = encoded(".png");
  png.replace(16, 8, big_endian(8001) + big_endian(8000));
  EXPECT_EQ(refusal(png, "a.png"),
            "a.png: is 8001 x 8000 pixels; more than 64 megapixels are refused");
  EXPECT_EQ(refusal("P6 100000 100000 255\n", "a.ppm"),
            "a.ppm: is 100000 x 100000 pixels; more than 64 megapixels are refused");
  std::string bmp = encoded(".bmp");
  bmp.replace(18, 8, std::string("\0\0\1\0\0\0\1\0", 8));  // 65536 x 65536, low byte first
  EXPECT_EQ(refusal(bmp, "a.bmp"),
            "a.bmp: is 65536 x 65536 pixels; more than 64 megapixels are refused");
  std::string jpeg = encoded(".jpg");
  const std::size_t frame = jpeg.find("\xff\xc0");
  ASSERT_NE(frame, std::string::npos);
  jpeg.replace(frame + 5, 4, "\xff\xff\xff\xff");
  EXPECT_EQ(refusal(jpeg, "a.jpg"),
            "a.jpg: is 65535 x 65535 pixels; more than 64 megapixels are refused");
  // Exactly 64 megapixels are no giant: then it is the size or the missing pixels that count.
  EXPECT_EQ(refusal("P6 8000 8000 255\n", "a.ppm"),
            "a.ppm: is cut short; copy or capture it again");
}

TEST(DecodeImage, RefusesBrokenHeaders) {
  EXPECT_EQ(refusal("P6 40 ? 255\n", "a.ppm"),
            "a.ppm: its PPM header is damaged; capture it again");
  EXPECT_EQ(refusal("P6 0 30 255\n", "a.ppm"),
            "a.ppm: its PPM header is damaged; capture it again");
  EXPECT_EQ(refusal("BM", "a.bmp"), "a.bmp: its BMP header is damaged; capture it again");
}

TEST(DecodeImage, RefusesAnotherSizeThanTheRigs) {
  EXPECT_EQ(refusal(encoded(".png"), "a.png", {320, 240}),
            "a.png: is 40 x 30 pixels; rig.yaml says 320 x 240");
}

TEST(Rgb565, BothByteOrdersGiveTheSamePicture) {
  // Pure red, green and blue, white and black, as the words F800, 07E0, 001F, FFFF, 0000.
  const std::string high("\xf8\x00\x07\xe0\x00\x1f\xff\xff\x00\x00\xf8\x00", 12);
  const std::string low("\x00\xf8\xe0\x07\x1f\x00\xff\xff\x00\x00\x00\xf8", 12);
  const cv::Mat a = decode_image(high, "a.565", {3, 2}, ByteOrder::high_first);
  const cv::Mat b = decode_image(low, "a.rgb565", {3, 2}, ByteOrder::low_first);
  ASSERT_EQ(a.size(), cv::Size(3, 2));
  EXPECT_TRUE(same(a, b));
  EXPECT_EQ(a.at<cv::Vec3b>(0, 0), cv::Vec3b(0, 0, 255));
  EXPECT_EQ(a.at<cv::Vec3b>(0, 1), cv::Vec3b(0, 255, 0));
  EXPECT_EQ(a.at<cv::Vec3b>(0, 2), cv::Vec3b(255, 0, 0));
  EXPECT_EQ(a.at<cv::Vec3b>(1, 0), cv::Vec3b(255, 255, 255));
  EXPECT_EQ(a.at<cv::Vec3b>(1, 1), cv::Vec3b(0, 0, 0));
}

TEST(Rgb565, RoundTripsAndKeepsTheTopBits) {
  for (const ByteOrder order : {ByteOrder::high_first, ByteOrder::low_first}) {
    const std::string dump = encode_rgb565(picture(), order);
    ASSERT_EQ(dump.size(), 40U * 30U * 2U);
    const cv::Mat read = decode_image(dump, "a.565", {40, 30}, order);
    for (int v = 0; v < 30; ++v) {
      for (int u = 0; u < 40; ++u) {
        const auto was = picture().at<cv::Vec3b>(v, u);
        const auto is = read.at<cv::Vec3b>(v, u);
        ASSERT_EQ(was[0] >> 3, is[0] >> 3);
        ASSERT_EQ(was[1] >> 2, is[1] >> 2);
        ASSERT_EQ(was[2] >> 3, is[2] >> 3);
      }
    }
    EXPECT_EQ(encode_rgb565(read, order), dump);
  }
}

TEST(Rgb565, RefusesAnotherNumberOfBytes) {
  EXPECT_EQ(refusal(std::string(2399, 'x'), "a.565", {40, 30}),
            "a.565: has 2399 bytes; a raw RGB565 dump of 40 x 30 pixels has 2400: it is cut short");
  EXPECT_EQ(
      refusal(std::string(2402, 'x'), "a.565", {40, 30}),
      "a.565: has 2402 bytes; a raw RGB565 dump of 40 x 30 pixels has 2400: check the size in "
      "rig.yaml");
  EXPECT_EQ(refusal("xx", "a.565"),
            "a.565: a raw RGB565 dump needs the camera's size; give it in rig.yaml");
}

class Frames : public testing::Test {
 protected:
  Frames() {
    std::filesystem::remove_all(folder_);
    camera_.width_px = 40;
    camera_.height_px = 30;
  }
  void add(const std::string& name, const std::string& bytes) {
    write_file(folder_ / name, bytes);
    wanted_.push_back({"frames/" + name, "", folder_ / name});
  }
  std::filesystem::path folder_ = std::filesystem::path(testing::TempDir()) / "load_frames_test";
  CameraSpec camera_;
  std::vector<FrameToLoad> wanted_;
};

TEST_F(Frames, BadImagesAreLeftOutInOrderAndTheRestGoesOn) {
  add("1.png", encoded(".png"));
  add("2.png", "");
  add("3.bmp", encoded(".bmp"));
  add("4.jpg", encoded(".jpg").substr(0, 300));
  add("5.png", encoded(".png", picture(20, 20)));
  wanted_.push_back({"frames/6.png", "", folder_ / "6.png"});
  Progress silent;
  const LoadedFrames loaded = load_frames(wanted_, camera_, silent);
  ASSERT_EQ(loaded.frames.size(), 2U);
  EXPECT_EQ(loaded.frames[0].image, "frames/1.png");
  EXPECT_EQ(loaded.frames[1].image, "frames/3.bmp");
  EXPECT_TRUE(same(loaded.frames[1].bgr, picture()));
  const std::string at = folder_.string() + "/";
  EXPECT_EQ(left_out_text(loaded),
            "4 of 6 images left out: " + at + "2.png (is empty; capture it again); " + at +
                "4.jpg (is cut short; copy or capture it again); " + at +
                "5.png (is 20 x 20 pixels; rig.yaml says 40 x 30); " + at +
                "6.png (cannot be read; check the name and its permissions)");
}

TEST_F(Frames, TheSummaryNamesFiveAtMost) {
  for (int i = 0; i < 8; ++i) add(std::to_string(i) + ".png", "");
  add("8.png", encoded(".png"));
  Progress silent;
  const std::string text = left_out_text(load_frames(wanted_, camera_, silent));
  EXPECT_THAT(text, testing::StartsWith("8 of 9 images left out: "));
  EXPECT_THAT(text, HasSubstr("4.png (is empty; capture it again); and 3 more"));
  EXPECT_THAT(text, testing::Not(HasSubstr("5.png")));
  EXPECT_EQ(left_out_text({}), "");
}

TEST_F(Frames, AStoppedLoadKeepsWhatIsReadAndNamesNothingAsBad) {
  for (int i = 0; i < 4; ++i) add(std::to_string(i) + ".png", encoded(".png"));
  struct Stopped : Progress {
    [[nodiscard]] bool cancelled() const override { return true; }
  } stopped;
  const LoadedFrames loaded = load_frames(wanted_, camera_, stopped);
  EXPECT_TRUE(loaded.frames.empty());
  EXPECT_TRUE(loaded.left_out.empty());
}

TEST(IsImageName, GoesByTheEndingInEitherCase) {
  for (const char* name :
       {"a.png", "a.JPG", "a.jpeg", "a.bmp", "a.ppm", "a.pgm", "a.565", "a.rgb565"}) {
    EXPECT_TRUE(is_image_name(name)) << name;
  }
  for (const char* name : {"a.gif", "png", "a.png.txt", "a", "a.tiff"}) {
    EXPECT_FALSE(is_image_name(name)) << name;
  }
}

}  // namespace
}  // namespace rondel::vision
