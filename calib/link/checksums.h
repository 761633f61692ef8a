#pragma once

#include <cstdint>
#include <span>

namespace rondel::link {

/// CRC-8, polynomial 07, start 0: of "123456789" it is F4.
[[nodiscard]] std::uint8_t crc8(std::span<const std::uint8_t> bytes);

/// CRC-16, polynomial 1021, start FFFF: of "123456789" it is 29B1.
[[nodiscard]] std::uint16_t crc16(std::span<const std::uint8_t> bytes);

/// The sum of the bytes, its lower 7 bits.
[[nodiscard]] std::uint8_t sum7(std::span<const std::uint8_t> bytes);

}  // namespace rondel::link
