// SPDX-License-Identifier: Apache-2.0
#include "plugin/daemon/lines.hpp"

#include <poll.h>
#include <spdlog/sinks/base_sink.h>
#include <spdlog/spdlog.h>
#include <unistd.h>

#include <algorithm>
#include <cerrno>
#include <climits>
#include <mutex>
#include <string>
#include <string_view>

namespace halfturn::daemon {

namespace {

class PatientSink : public spdlog::sinks::base_sink<std::mutex> {
 public:
  explicit PatientSink(int descriptor) : descriptor_(descriptor) {}

 protected:
  void sink_it_(const spdlog::details::log_msg& message) override {
    spdlog::memory_buf_t line;
    formatter_->format(message, line);
    if (lost_ > 0 && write(std::to_string(lost_) + " lines before this one were lost: standard error was full\n")) lost_ = 0;
    if (!write({line.data(), line.size()})) ++lost_;
  }
  void flush_() override {}

 private:
  /// In pieces for which a pipe that is ready has room (pipe(7): PIPE_BUF bytes).
  bool write(std::string_view text) {
    while (!text.empty()) {
      pollfd ready{descriptor_, POLLOUT, 0};
      if (::poll(&ready, 1, 0) != 1 || (ready.revents & POLLOUT) == 0) return false;
      const ssize_t written = ::write(descriptor_, text.data(), std::min<std::size_t>(text.size(), PIPE_BUF));
      if (written < 0 && errno != EINTR) return false;
      if (written > 0) text.remove_prefix(static_cast<std::size_t>(written));
    }
    return true;
  }

  int descriptor_;
  std::size_t lost_ = 0;
};

}  // namespace

std::shared_ptr<spdlog::logger> lines_to(int descriptor, spdlog::level::level_enum level) {
  auto logger = std::make_shared<spdlog::logger>("halfturn", std::make_shared<PatientSink>(descriptor));
  logger->set_pattern("%Y-%m-%dT%H:%M:%S.%eZ %l %v", spdlog::pattern_time_type::utc);
  logger->set_level(level);
  return logger;
}

}  // namespace halfturn::daemon
