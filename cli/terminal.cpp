#include "cli/terminal.h"

#include <unistd.h>

#include <chrono>
#include <csignal>
#include <cstdio>
#include <cstdlib>
#include <mutex>

namespace halfmark {

namespace {

// A signal handler reaches globals only; the control lives until the program ends.
const RunControl* signalled_control = nullptr;

void on_signal(int) {
  if (signalled_control != nullptr) signalled_control->cancel();
}

class ProgressLine {
 public:
  void show(const std::string& step, double fraction) {
    const std::lock_guard<std::mutex> lock(mutex_);
    const auto now = std::chrono::steady_clock::now();
    const bool due = step != step_ || now - last_ > std::chrono::milliseconds(100);
    if (!due) return;
    step_ = step;
    last_ = now;
    constexpr int width = 24;
    const int filled = static_cast<int>(fraction * width + 0.5);
    std::string bar;
    for (int i = 0; i < width; ++i) bar += i < filled ? '=' : '.';
    std::fprintf(stderr, "\r\033[K%s %s %3.0f %%", bar.c_str(), step.c_str(), 100 * fraction);
    std::fflush(stderr);
    drawn_ = true;
  }
  void end() {
    const std::lock_guard<std::mutex> lock(mutex_);
    if (drawn_) std::fputs("\r\033[K", stderr);
    drawn_ = false;
  }

 private:
  std::mutex mutex_;
  std::string step_;
  std::chrono::steady_clock::time_point last_;
  bool drawn_ = false;
};

ProgressLine& progress_line() {
  static ProgressLine line;
  return line;
}

}  // namespace

RunControl terminal_control(bool quiet) {
  const bool draw = !quiet && ::isatty(STDERR_FILENO) != 0;
  static RunControl control;
  control =
      draw
          ? RunControl([](const std::string& step, double fraction) { progress_line().show(step, fraction); })
          : RunControl();
  signalled_control = &control;
  struct sigaction action = {};
  action.sa_handler = on_signal;
  sigemptyset(&action.sa_mask);
  action.sa_flags = SA_RESTART;
  sigaction(SIGINT, &action, nullptr);
  sigaction(SIGTERM, &action, nullptr);
  // A closed pipe is reported by the write that fails, not by a silent death with half-written files behind.
  std::signal(SIGPIPE, SIG_IGN);
  return control;
}

void end_progress() { progress_line().end(); }

bool colour_wanted() { return ::isatty(STDOUT_FILENO) != 0 && std::getenv("NO_COLOR") == nullptr; }

}  // namespace halfmark
