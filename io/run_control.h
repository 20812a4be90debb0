// One copyable handle through every long call: cancel in, progress out. Long calls test it between slabs (at
// most a few planes of work, well below a second) by step() or throw_if_cancelled().
#pragma once

#include <atomic>
#include <functional>
#include <memory>
#include <string>

#include "io/problem.h"

namespace halfmark {

class RunControl {
 public:
  // Called with the name of the step and its fraction done in [0, 1], possibly from several threads.
  using Progress = std::function<void(const std::string& step, double fraction)>;

  RunControl() : state_(std::make_shared<State>()) {}
  explicit RunControl(Progress progress) : RunControl() { state_->progress = std::move(progress); }

  void cancel() const { state_->cancelled.store(true); }  // async-signal-safe
  bool cancelled() const { return state_->cancelled.load(std::memory_order_relaxed); }
  void throw_if_cancelled() const {
    if (cancelled()) throw Problem(ExitStatus::interrupted, "interrupted; nothing was written");
  }
  void step(const std::string& name, double fraction) const {
    throw_if_cancelled();
    if (state_->progress) state_->progress(name, fraction);
  }

 private:
  struct State {
    std::atomic<bool> cancelled{false};
    Progress progress;
  };
  std::shared_ptr<State> state_;
};

}  // namespace halfmark
