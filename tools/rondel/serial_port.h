#pragma once

#include <deque>
#include <string>

#include "tools/firmware/transfer.h"

namespace rondel::app {

/// A serial device as a Line: 8N1, raw. InputError where it cannot be opened or does not know the
/// rate.
class SerialPort final : public firmware::Line {
 public:
  SerialPort(const std::string& device, int baud);
  ~SerialPort() override;
  void write(std::span<const std::uint8_t> bytes) override;
  [[nodiscard]] std::optional<std::uint8_t> read(double timeout_s) override;

 private:
  std::string device_;
  int handle_ = -1;
  std::deque<std::uint8_t> held_;
};

}  // namespace rondel::app
