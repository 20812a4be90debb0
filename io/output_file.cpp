#include "io/output_file.h"

#include <fcntl.h>
#include <unistd.h>

#include <cerrno>
#include <cstdio>
#include <cstring>
#include <system_error>

#include "io/problem.h"

namespace halfmark {
namespace fs = std::filesystem;

namespace {

ExitStatus status_of(int error) {
  return error == ENOSPC || error == EDQUOT || error == EIO || error == EFBIG ? ExitStatus::io_error
                                                                              : ExitStatus::cannot_create;
}

[[noreturn]] void fail(const fs::path& file, const std::string& doing, int error) {
  const std::string advice =
      error == ENOSPC || error == EDQUOT  ? "; free some space or choose another folder with --out"
      : error == EACCES || error == EROFS ? "; choose a folder you may write to with --out"
                                          : "";
  throw Problem(status_of(error), file.string() + ": cannot " + doing + ": " + std::strerror(error) + advice);
}

}  // namespace

OutputSet::~OutputSet() {
  std::error_code ignored;
  for (const Entry& entry : entries_) fs::remove(entry.temporary, ignored);
  // Deepest first; a folder that holds anything stays.
  for (auto folder = made_folders_.rbegin(); folder != made_folders_.rend(); ++folder)
    fs::remove(*folder, ignored);
}

void OutputSet::make_folder(const fs::path& folder) {
  std::error_code error;
  if (folder.empty() || fs::is_directory(folder, error)) return;
  if (fs::exists(folder, error)) {
    throw Problem(ExitStatus::cannot_create,
                  folder.string() + ": is a file, not a folder; choose another with --out");
  }
  make_folder(folder.parent_path());
  if (!fs::create_directory(folder, error) && error) fail(folder, "make the folder", error.value());
  made_folders_.push_back(folder);
}

fs::path OutputSet::temporary_for(const fs::path& final_name) {
  const std::string name = "." + std::to_string(::getpid()) + ".part." + final_name.filename().string();
  const fs::path temporary = final_name.parent_path() / name;
  entries_.push_back({temporary, final_name});
  return temporary;
}

void OutputSet::write(const fs::path& final_name, std::string_view bytes) {
  const fs::path temporary = temporary_for(final_name);
  const int file = ::open(temporary.c_str(), O_WRONLY | O_CREAT | O_TRUNC | O_CLOEXEC, 0666);
  if (file < 0) fail(final_name, "create the file", errno);
  while (!bytes.empty()) {
    const ssize_t written = ::write(file, bytes.data(), bytes.size());
    if (written < 0 && errno == EINTR) continue;
    if (written < 0) {
      const int error = errno;
      ::close(file);
      fail(final_name, "write", error);
    }
    bytes.remove_prefix(static_cast<std::size_t>(written));
  }
  if (::close(file) != 0) fail(final_name, "write", errno);
}

void OutputSet::commit() {
  for (const Entry& entry : entries_) {
    const int file = ::open(entry.temporary.c_str(), O_RDONLY | O_CLOEXEC);
    if (file < 0) fail(entry.final_name, "write", errno);
    const int synced = ::fsync(file);
    const int error = errno;
    ::close(file);
    if (synced != 0 && error != EINVAL && error != EROFS) fail(entry.final_name, "write", error);
  }
  for (const Entry& entry : entries_) {
    if (std::rename(entry.temporary.c_str(), entry.final_name.c_str()) != 0)
      fail(entry.final_name, "name the file", errno);
  }
  entries_.clear();
  made_folders_.clear();
}

}  // namespace halfmark
