#include "calib/link/checksums.h"

namespace rondel::link {

std::uint8_t crc8(std::span<const std::uint8_t> bytes) {
  unsigned crc = 0;
  for (const std::uint8_t byte : bytes) {
    crc ^= byte;
    for (int bit = 0; bit < 8; ++bit)
      crc = ((crc << 1) ^ ((crc & 0x80U) != 0 ? 0x07U : 0U)) & 0xFFU;
  }
  return static_cast<std::uint8_t>(crc);
}

std::uint16_t crc16(std::span<const std::uint8_t> bytes) {
  unsigned crc = 0xFFFF;
  for (const std::uint8_t byte : bytes) {
    crc ^= static_cast<unsigned>(byte) << 8;
    for (int bit = 0; bit < 8; ++bit) {
      crc = ((crc << 1) ^ ((crc & 0x8000U) != 0 ? 0x1021U : 0U)) & 0xFFFFU;
    }
  }
  return static_cast<std::uint16_t>(crc);
}

std::uint8_t sum7(std::span<const std::uint8_t> bytes) {
  unsigned sum = 0;
  for (const std::uint8_t byte : bytes) sum += byte;
  return static_cast<std::uint8_t>(sum & 127U);
}

}  // namespace rondel::link
