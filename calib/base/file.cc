#include "calib/base/file.h"

#include <fcntl.h>
#include <unistd.h>

#include <array>
#include <bit>
#include <cerrno>
#include <charconv>
#include <cstdio>
#include <fstream>
#include <iterator>
#include <system_error>

#include "calib/base/problem.h"

namespace rondel {

std::string read_file(const std::filesystem::path& path) {
  std::error_code ignored;
  if (std::filesystem::is_directory(path, ignored)) {
    throw InputError(path.string(), "is a folder; a file is needed");
  }
  std::ifstream in(path, std::ios::binary);
  if (!in) throw InputError(path.string(), "cannot be read; check the name and its permissions");
  return {std::istreambuf_iterator<char>(in), std::istreambuf_iterator<char>()};
}

namespace {

/// Writes `bytes` into a file beside `path`, hidden and of no known ending; its name.
std::filesystem::path write_beside(const std::filesystem::path& path, std::string_view bytes) {
  namespace fs = std::filesystem;
  if (path.has_parent_path()) fs::create_directories(path.parent_path());
  std::string name(1, '.');
  name.append(path.filename().string()).append(".part").append(std::to_string(::getpid()));
  fs::path beside = path.parent_path() / name;
  std::ofstream out(beside, std::ios::binary | std::ios::trunc);
  out.write(bytes.data(), static_cast<std::streamsize>(bytes.size()));
  out.flush();
  if (!out) {
    out.close();
    std::error_code ignored;
    fs::remove(beside, ignored);
    throw fs::filesystem_error("cannot write", path, std::make_error_code(std::errc::io_error));
  }
  return beside;
}

}  // namespace

void write_file(const std::filesystem::path& path, std::string_view bytes) {
  const std::filesystem::path beside = write_beside(path, bytes);
  std::error_code error;
  std::filesystem::rename(beside, path, error);
  if (!error) return;
  std::error_code ignored;
  std::filesystem::remove(beside, ignored);
  throw std::filesystem::filesystem_error("cannot write", path, error);
}

bool write_new_file(const std::filesystem::path& path, std::string_view bytes) {
  namespace fs = std::filesystem;
  if (fs::exists(fs::symlink_status(path))) return false;
  const fs::path beside = write_beside(path, bytes);
  int failure = 0;
  if (::renameat2(AT_FDCWD, beside.c_str(), AT_FDCWD, path.c_str(), RENAME_NOREPLACE) != 0) {
    failure = errno;
    // Some file systems cannot rename without replacing; there the check above has to do.
    if (failure == EINVAL && ::rename(beside.c_str(), path.c_str()) == 0) return true;
  }
  if (failure == 0) return true;
  std::error_code ignored;
  fs::remove(beside, ignored);
  if (failure == EEXIST) return false;
  throw fs::filesystem_error(
      "cannot write", path, std::error_code(failure, std::generic_category()));
}

std::string sha256_hex(std::string_view bytes) {
  // FIPS 180-4: the first 32 bits of the fractional parts of the cube roots of the first 64 primes.
  static constexpr std::array<std::uint32_t, 64> kRound = {
      0x428a2f98, 0x71374491, 0xb5c0fbcf, 0xe9b5dba5, 0x3956c25b, 0x59f111f1, 0x923f82a4,
      0xab1c5ed5, 0xd807aa98, 0x12835b01, 0x243185be, 0x550c7dc3, 0x72be5d74, 0x80deb1fe,
      0x9bdc06a7, 0xc19bf174, 0xe49b69c1, 0xefbe4786, 0x0fc19dc6, 0x240ca1cc, 0x2de92c6f,
      0x4a7484aa, 0x5cb0a9dc, 0x76f988da, 0x983e5152, 0xa831c66d, 0xb00327c8, 0xbf597fc7,
      0xc6e00bf3, 0xd5a79147, 0x06ca6351, 0x14292967, 0x27b70a85, 0x2e1b2138, 0x4d2c6dfc,
      0x53380d13, 0x650a7354, 0x766a0abb, 0x81c2c92e, 0x92722c85, 0xa2bfe8a1, 0xa81a664b,
      0xc24b8b70, 0xc76c51a3, 0xd192e819, 0xd6990624, 0xf40e3585, 0x106aa070, 0x19a4c116,
      0x1e376c08, 0x2748774c, 0x34b0bcb5, 0x391c0cb3, 0x4ed8aa4a, 0x5b9cca4f, 0x682e6ff3,
      0x748f82ee, 0x78a5636f, 0x84c87814, 0x8cc70208, 0x90befffa, 0xa4506ceb, 0xbef9a3f7,
      0xc67178f2};
  std::array<std::uint32_t, 8> state = {0x6a09e667,
                                        0xbb67ae85,
                                        0x3c6ef372,
                                        0xa54ff53a,
                                        0x510e527f,
                                        0x9b05688c,
                                        0x1f83d9ab,
                                        0x5be0cd19};
  const auto block = [&state](const unsigned char* p) {
    std::array<std::uint32_t, 64> w{};
    for (std::size_t i = 0; i < 16; ++i) {
      w[i] = (std::uint32_t{p[4 * i]} << 24) | (std::uint32_t{p[4 * i + 1]} << 16) |
             (std::uint32_t{p[4 * i + 2]} << 8) | std::uint32_t{p[4 * i + 3]};
    }
    for (std::size_t i = 16; i < 64; ++i) {
      const std::uint32_t a = w[i - 15];
      const std::uint32_t b = w[i - 2];
      w[i] = w[i - 16] + w[i - 7] + (std::rotr(a, 7) ^ std::rotr(a, 18) ^ (a >> 3)) +
             (std::rotr(b, 17) ^ std::rotr(b, 19) ^ (b >> 10));
    }
    auto [a, b, c, d, e, f, g, h] = state;
    for (std::size_t i = 0; i < 64; ++i) {
      const std::uint32_t t1 = h + (std::rotr(e, 6) ^ std::rotr(e, 11) ^ std::rotr(e, 25)) +
                               ((e & f) ^ (~e & g)) + kRound[i] + w[i];
      const std::uint32_t t2 =
          (std::rotr(a, 2) ^ std::rotr(a, 13) ^ std::rotr(a, 22)) + ((a & b) ^ (a & c) ^ (b & c));
      h = g, g = f, f = e, e = d + t1, d = c, c = b, b = a, a = t1 + t2;
    }
    state[0] += a, state[1] += b, state[2] += c, state[3] += d;
    state[4] += e, state[5] += f, state[6] += g, state[7] += h;
  };
  const auto* data = reinterpret_cast<const unsigned char*>(bytes.data());
  std::size_t left = bytes.size();
  for (; left >= 64; left -= 64, data += 64) block(data);
  std::array<unsigned char, 128> tail{};
  for (std::size_t i = 0; i < left; ++i) tail[i] = data[i];
  tail[left] = 0x80;
  const std::size_t tail_size = left < 56 ? 64 : 128;
  const std::uint64_t bits = std::uint64_t{bytes.size()} * 8;
  for (std::size_t i = 0; i < 8; ++i) {
    tail[tail_size - 1 - i] = static_cast<unsigned char>(bits >> (8 * i));
  }
  block(tail.data());
  if (tail_size == 128) block(tail.data() + 64);
  static constexpr std::string_view kHex = "0123456789abcdef";
  std::string hex;
  for (const std::uint32_t word : state) {
    for (int shift = 28; shift >= 0; shift -= 4) hex += kHex[(word >> shift) & 15U];
  }
  return hex;
}

std::uint32_t crc32(std::string_view bytes) {
  std::uint32_t crc = 0xFFFFFFFFU;
  for (const char c : bytes) {
    crc ^= static_cast<unsigned char>(c);
    for (int bit = 0; bit < 8; ++bit) crc = (crc >> 1) ^ ((crc & 1U) != 0 ? 0xEDB88320U : 0U);
  }
  return ~crc;
}

std::string number_text(double value) {
  std::array<char, 32> buffer{};
  const auto [end, error] = std::to_chars(buffer.data(), buffer.data() + buffer.size(), value);
  return error == std::errc() ? std::string(buffer.data(), end) : std::string("nan");
}

}  // namespace rondel
