#pragma once

#include <simavr/sim_avr.h>
#include <simavr/sim_elf.h>
#include <simavr/sim_io.h>

#include <cstdint>
#include <cstdlib>
#include <filesystem>
#include <stdexcept>
#include <string>
#include <vector>

namespace rondel::boards {

/// What an AVR program (board_avr.c) did in the simulator.
struct AvrRun {
  std::vector<std::uint8_t> bytes;           ///< written to GPIOR1
  std::vector<std::uint64_t> encode_cycles;  ///< one for each sample
  std::vector<std::uint64_t> decode_cycles;
  bool ended = false;
};

/// Runs `elf` on a simulated ATmega328P until it marks its end or `most_cycles` are over.
inline AvrRun run_avr(const std::filesystem::path& elf, std::uint64_t most_cycles) {
  elf_firmware_t firmware{};
  if (elf_read_firmware(elf.c_str(), &firmware) != 0) {
    throw std::runtime_error("cannot load " + elf.string());
  }
  avr_t* avr = avr_make_mcu_by_name("atmega328p");
  if (avr == nullptr) throw std::runtime_error("the simulator knows no ATmega328P");
  avr_init(avr);
  avr->log = 0;
  avr_load_firmware(avr, &firmware);
  struct Watch {
    AvrRun run;
    std::uint64_t since = 0;
    std::uint64_t nothing = 0;  // cycles between two marks with nothing between them
  } watch;
  constexpr avr_io_addr_t kMark = 0x3E;  // GPIOR0
  constexpr avr_io_addr_t kByte = 0x4A;  // GPIOR1
  avr_register_io_write(
      avr,
      kMark,
      [](avr_t* board, avr_io_addr_t /*at*/, std::uint8_t value, void* param) {
        auto& w = *static_cast<Watch*>(param);
        const std::uint64_t spent = board->cycle - w.since;
        if (value == 6) w.nothing = spent;
        if (value == 2) w.run.encode_cycles.push_back(spent - w.nothing);
        if (value == 4) w.run.decode_cycles.push_back(spent - w.nothing);
        if (value == 7) w.run.ended = true;
        w.since = board->cycle;
      },
      &watch);
  avr_register_io_write(
      avr,
      kByte,
      [](avr_t* /*board*/, avr_io_addr_t /*at*/, std::uint8_t value, void* param) {
        static_cast<Watch*>(param)->run.bytes.push_back(value);
      },
      &watch);
  while (!watch.run.ended && avr->cycle < most_cycles) {
    const int state = avr_run(avr);
    if (state == cpu_Done || state == cpu_Crashed) break;
  }
  avr_terminate(avr);
  return watch.run;
}

}  // namespace rondel::boards
