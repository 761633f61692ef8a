#pragma once

#include <filesystem>
#include <nlohmann/json.hpp>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

namespace rondel::desk {

/// Somebody else changed the file in the meantime; nothing was written.
class Conflict : public std::exception {
 public:
  explicit Conflict(std::string text) : text_(std::move(text)) {}
  [[nodiscard]] const char* what() const noexcept override { return text_.c_str(); }

 private:
  std::string text_;
};

/// All edits of a venue's own files (never of results/) made at the desk, with undo and redo. Every
/// edit is on disk, written beside and renamed, before it is answered; what others change in
/// between is merged where rows are independent and refused (Conflict) where they are not.
class Journal {
 public:
  explicit Journal(std::filesystem::path folder) : folder_(std::move(folder)) {}

  /// Appends `row` to a CSV file of the venue, creating it with `header` when it is missing.
  void add_row(const std::string& file, std::string_view header, const std::string& row);
  /// Replaces the line that reads `before`; an empty `after` removes it. `line` (1-based) says
  /// which, where several read the same.
  void change_row(const std::string& file,
                  int line,
                  const std::string& before,
                  const std::string& after);
  /// Replaces a whole file; `base` is the SHA-256 of the content the edit started from.
  void replace(const std::string& file, const std::string& base, const std::string& text);
  /// Adds a file that must not exist yet.
  void add_file(const std::string& file, std::string bytes);
  void remove_file(const std::string& file);

  /// Takes the last edit back, or makes it again; answers with the file it touched. Conflict where
  /// somebody else changed that file since; InputError where there is nothing to take back.
  std::string undo();
  std::string redo();

  [[nodiscard]] std::size_t undoable() const { return done_.size(); }
  [[nodiscard]] std::size_t redoable() const { return undone_.size(); }

 private:
  struct Edit {
    std::string file;
    std::optional<std::string> before, after;  ///< whole contents; absent: no such file
  };
  [[nodiscard]] std::optional<std::string> content(const std::string& file) const;
  void put(const std::string& file, const std::optional<std::string>& bytes) const;
  void make(Edit edit);

  std::filesystem::path folder_;
  std::vector<Edit> done_, undone_;
};

/// One CSV line (no line end) of `cells`, quoted where needed (RFC 4180).
[[nodiscard]] std::string csv_line(const std::vector<std::string>& cells);

}  // namespace rondel::desk
