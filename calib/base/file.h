#pragma once

#include <cstdint>
#include <filesystem>
#include <span>
#include <string>
#include <string_view>
#include <vector>

namespace rondel {

/// The whole file; InputError naming it when it cannot be read.
[[nodiscard]] std::string read_file(const std::filesystem::path& path);

/// Writes beside and renames over, so that a reader sees the old or the new, never a torn file.
/// Creates the folder. Throws std::filesystem::filesystem_error.
void write_file(const std::filesystem::path& path, std::string_view bytes);

/// The same, but a file that is already there stays as it is, and the answer is false.
[[nodiscard]] bool write_new_file(const std::filesystem::path& path, std::string_view bytes);

/// SHA-256 (FIPS 180-4) as 64 lower-case hex digits.
[[nodiscard]] std::string sha256_hex(std::string_view bytes);

/// CRC-32 (IEEE 802.3, as in zlib): of "123456789" it is CBF43926.
[[nodiscard]] std::uint32_t crc32(std::string_view bytes);

/// `value` with the fewest digits that read back to the same double, whatever the locale.
[[nodiscard]] std::string number_text(double value);

}  // namespace rondel
