// The one error type of the program: a kind, which fixes the exit status, and one sentence that says what is
// wrong, where, and what to do. Context is prefixed on the way up: "pores: plane 14: ...".
#pragma once

#include <stdexcept>
#include <string>

namespace halfmark {

// Exit statuses of the command line (the numbers above 63 follow BSD sysexits.h).
enum class ExitStatus {
  accept = 0,
  reject = 1,
  undecided = 2,
  usage = 64,
  bad_data = 65,
  input_missing = 66,
  internal = 70,
  cannot_create = 73,
  io_error = 74,
  interrupted = 130
};

class Problem : public std::runtime_error {
 public:
  Problem(ExitStatus status, const std::string& sentence) : std::runtime_error(sentence), status_(status) {}

  ExitStatus status() const { return status_; }

  // The same problem seen from one level up: "context: sentence".
  Problem within(const std::string& context) const { return Problem(status_, context + ": " + what()); }

 private:
  ExitStatus status_;
};

}  // namespace halfmark
