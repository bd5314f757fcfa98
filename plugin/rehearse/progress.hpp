// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <ostream>

#include "plugin/rehearse/night.hpp"

/// How far the night is, for a person: one line rewritten on a terminal, a line every 10 % elsewhere.
namespace halfturn::rehearse {

class Progress {
 public:
  Progress(std::ostream& out, bool terminal) : out_(out), terminal_(terminal) {}
  Progress(const Progress&) = delete;
  Progress& operator=(const Progress&) = delete;
  ~Progress();

  void show(const Moment& moment);

 private:
  std::ostream& out_;
  bool terminal_;
  int shown_ = -1;  // percent on a terminal, tenths elsewhere
  bool open_ = false;
};

}  // namespace halfturn::rehearse
