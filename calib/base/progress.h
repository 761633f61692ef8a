#pragma once

#include <string_view>

namespace rondel {

/// Where long work says how far it is. The library calls it; tools/ decides what to show.
class Progress {
 public:
  Progress() = default;
  Progress(const Progress&) = delete;
  Progress& operator=(const Progress&) = delete;
  virtual ~Progress() = default;

  /// `done` of `total` units of `what` are finished. May be called from several threads.
  virtual void at(std::string_view /*what*/, int /*done*/, int /*total*/) {}
  /// A remark worth showing now, in one line.
  virtual void note(std::string_view /*text*/) {}
  /// True once the person asked to stop; long loops look at it and leave what is finished.
  [[nodiscard]] virtual bool cancelled() const { return false; }
};

}  // namespace rondel
