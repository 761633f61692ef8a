#include "tools/firmware/transfer.h"

#include <fmt/format.h>

#include <algorithm>

#include "calib/base/file.h"
#include "calib/base/problem.h"
#include "calib/link/checksums.h"

namespace rondel::firmware {
namespace {

using Bytes = std::vector<std::uint8_t>;

void put(Bytes& to, std::uint32_t value, int bytes) {
  for (int i = 0; i < bytes; ++i) to.push_back(static_cast<std::uint8_t>(value >> (8 * i)));
}

Bytes frame(char kind, std::uint32_t number, std::span<const std::uint8_t> body) {
  Bytes plain = {static_cast<std::uint8_t>(kind)};
  put(plain, number, 2);
  plain.insert(plain.end(), body.begin(), body.end());
  put(plain, link::crc16(plain), 2);
  Bytes out = stuff(plain);
  out.insert(out.begin(), 0);  // ends whatever noise came before
  out.push_back(0);
  return out;
}

struct Answer {
  char kind = 0;
  int number = 0;
};

/// The next answer whose CRC is right, within `timeout_s` of silence.
std::optional<Answer> read_answer(Line& line, double timeout_s) {
  constexpr int kMostBytes = 64;  // of noise, before the frame is sent again
  Bytes held;
  for (int i = 0; i < kMostBytes; ++i) {
    const auto byte = line.read(timeout_s);
    if (!byte) return std::nullopt;
    if (*byte != 0) {
      held.push_back(*byte);
      continue;
    }
    const auto plain = unstuff(held);
    held.clear();
    if (!plain || plain->size() != 5) continue;
    if (link::crc16(std::span(*plain).first(3)) != ((*plain)[3] | (*plain)[4] << 8)) continue;
    return Answer{static_cast<char>((*plain)[0]), (*plain)[1] | (*plain)[2] << 8};
  }
  return std::nullopt;
}

}  // namespace

Bytes stuff(std::span<const std::uint8_t> bytes) {
  Bytes out;
  std::size_t from = 0;
  while (true) {
    std::size_t to = from;
    while (to < bytes.size() && bytes[to] != 0 && to - from < 254) ++to;
    out.push_back(static_cast<std::uint8_t>(to - from + 1));
    out.insert(out.end(),
               bytes.begin() + static_cast<std::ptrdiff_t>(from),
               bytes.begin() + static_cast<std::ptrdiff_t>(to));
    if (to == bytes.size()) return out;
    from = to - from == 254 ? to : to + 1;
  }
}

std::optional<Bytes> unstuff(std::span<const std::uint8_t> bytes) {
  Bytes out;
  std::size_t from = 0;
  while (from < bytes.size()) {
    const std::size_t run = bytes[from++];
    if (run == 0 || from + run - 1 > bytes.size()) return std::nullopt;
    for (std::size_t i = 1; i < run; ++i) {
      if (bytes[from] == 0) return std::nullopt;
      out.push_back(bytes[from++]);
    }
    if (from < bytes.size() && run != 255) out.push_back(0);
  }
  return out;
}

double wire_bytes(std::size_t image_bytes) {
  // Kind, number, CRC, one byte of stuffing, a zero at each end; an answer is 5 + 1 + 1 bytes.
  constexpr double kFrame = 1 + 2 + 2 + 1 + 2;
  constexpr double kAnswer = 7;
  const auto blocks = static_cast<double>((image_bytes + kBlockBytes - 1) / kBlockBytes);
  return static_cast<double>(image_bytes) + blocks * (kFrame + kAnswer) + (kFrame + 12 + kAnswer) +
         (kFrame + 8 + kAnswer);
}

Transfer send_image(Line& line,
                    std::span<const std::uint8_t> image,
                    int baud,
                    int tries,
                    const std::string& where,
                    Progress& progress) {
  const std::size_t blocks = (image.size() + kBlockBytes - 1) / kBlockBytes;
  if (image.size() < 16 || blocks > 65535) {
    throw InputError(where, "this is no packed table; make it with 'rondel tables'");
  }
  const std::uint32_t crc = crc32({reinterpret_cast<const char*>(image.data()), image.size()});
  const std::uint32_t identity =
      static_cast<std::uint32_t>(image[12]) | static_cast<std::uint32_t>(image[13]) << 8 |
      static_cast<std::uint32_t>(image[14]) << 16 | static_cast<std::uint32_t>(image[15]) << 24;
  // A frame and its answer on the wire, and a board that may be writing flash meanwhile.
  const double timeout_s = 0.25 + 10.0 * 100.0 / baud;
  Transfer transfer;
  const auto ask = [&](const Bytes& bytes, const auto& fits) -> std::optional<Answer> {
    for (int i = 0; i < tries; ++i) {
      line.write(bytes);
      ++transfer.frames;
      transfer.repeats += i > 0 ? 1 : 0;
      while (const auto answer = read_answer(line, timeout_s)) {
        if (fits(*answer)) return answer;
      }
    }
    return std::nullopt;
  };
  const auto silent = [&]() {
    return InputError(where,
                      fmt::format("the board does not answer, tried {} times; check cable, rate "
                                  "({} baud) and that its receiver is running. Its old tables are "
                                  "still in use; sending again goes on where this stopped",
                                  tries,
                                  baud));
  };
  // A wrong byte can pass a CRC-16 once in a great while; the whole image's CRC then says no, and
  // one more round from the beginning mends it.
  for (int round = 0; round < 2; ++round) {
    Bytes body;
    put(body, static_cast<std::uint32_t>(image.size()), 4);
    put(body, crc, 4);
    put(body, identity, 4);
    const auto begun = ask(frame('B', 0, body), [](const Answer& a) { return a.kind == 'B'; });
    if (!begun) throw silent();
    auto next = static_cast<std::size_t>(begun->number);
    while (next < blocks) {
      progress.at("sending blocks", static_cast<int>(next), static_cast<int>(blocks));
      const std::size_t from = next * kBlockBytes;
      const auto block = image.subspan(from, std::min(kBlockBytes, image.size() - from));
      // Old answers name blocks up to this one; only what comes after says that it has arrived.
      const auto answer = ask(
          frame('D', static_cast<std::uint32_t>(next), block),
          [&](const Answer& a) { return a.kind == 'A' && a.number == static_cast<int>(next) + 1; });
      if (!answer) throw silent();
      ++next;
    }
    body.clear();
    put(body, crc, 4);
    put(body, identity, 4);
    const auto end = ask(frame('E', 0, body), [](const Answer& a) { return a.kind == 'F'; });
    if (!end) throw silent();
    if (end->number == 1) {
      transfer.accepted = true;
      progress.at("sending blocks", static_cast<int>(blocks), static_cast<int>(blocks));
      return transfer;
    }
  }
  throw InputError(
      where,
      "the board received everything and refuses it, twice: what arrived is not what was "
      "sent; its old tables are still in use");
}

}  // namespace rondel::firmware
