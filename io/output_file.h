// Outputs are written beside their final name and renamed when whole, so that no half-written file stays
// behind.
#pragma once

#include <cstddef>
#include <filesystem>
#include <string>
#include <string_view>
#include <vector>

namespace halfmark {

// A set of files that become visible together: each is written as a hidden temporary beside its final name;
// commit() renames them all; without commit() the destructor removes every temporary (and folders made for
// them).
class OutputSet {
 public:
  OutputSet() = default;
  OutputSet(const OutputSet&) = delete;
  OutputSet& operator=(const OutputSet&) = delete;
  ~OutputSet();

  // Makes a folder (and its parents) that is removed again if nothing is committed.
  // Throws Problem(cannot_create) with the system's reason.
  void make_folder(const std::filesystem::path& folder);
  // The temporary to write to for this final name, for libraries that want a path; keeps the ending.
  std::filesystem::path temporary_for(const std::filesystem::path& final_name);
  // Writes bytes; throws Problem(cannot_create) or Problem(io_error) ("disk full" with the system's reason).
  void write(const std::filesystem::path& final_name, std::string_view bytes);
  // Flushes and renames all; throws Problem(io_error).
  void commit();

 private:
  struct Entry {
    std::filesystem::path temporary, final_name;
  };
  std::vector<Entry> entries_;
  std::vector<std::filesystem::path> made_folders_;
};

}  // namespace halfmark
