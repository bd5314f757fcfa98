// SPDX-License-Identifier: Apache-2.0
// What the service manager is told, and the lines of the program's own log.
#include "plugin/daemon/notify.hpp"

#include <spdlog/spdlog.h>
#include <sys/socket.h>
#include <sys/un.h>
#include <unistd.h>

#include <cstdlib>
#include <cstring>
#include <string>

#include "plugin/daemon/lines.hpp"
#include "plugin/daemon/scan_line.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;

TEST_CASE("the state goes as one datagram to the socket that NOTIFY_SOCKET names, also an abstract one") {
  // sd_notify(3): a name that begins with @ has a zero byte in its place.
  const std::string name = "@halfturn-test-" + std::to_string(::getpid());
  sockaddr_un address{};
  address.sun_family = AF_UNIX;
  std::memcpy(address.sun_path, name.data(), name.size());
  address.sun_path[0] = '\0';
  const int listener = ::socket(AF_UNIX, SOCK_DGRAM, 0);
  REQUIRE(::bind(listener, reinterpret_cast<sockaddr*>(&address),
                 static_cast<socklen_t>(offsetof(sockaddr_un, sun_path) + name.size())) == 0);

  ::setenv("NOTIFY_SOCKET", name.c_str(), 1);
  CHECK(daemon::notify("READY=1"));
  char buffer[64] = {};
  CHECK(::recv(listener, buffer, sizeof buffer, MSG_DONTWAIT) == 7);
  CHECK(std::string(buffer) == "READY=1");
  ::close(listener);

  CHECK_FALSE(daemon::notify("READY=1"));  // nobody listens any more
  ::unsetenv("NOTIFY_SOCKET");
  CHECK_FALSE(daemon::notify("READY=1"));
}

TEST_CASE("a scan is one line: drive, name, verdict, frequency, codes of the reasons") {
  wire::Fitted scan;
  scan.drive = "red";
  scan.scan_name = "night-41";
  scan.verdict = "apply";
  CHECK(daemon::scan_line(scan) == "red night-41: apply (not stored)");
  scan.stored = true;
  CHECK(daemon::scan_line(scan) == "red night-41: apply");
  scan.estimates = {{"rabi_hz", {125340.0, 120.0, 125100.0, 125580.0, ""}}};
  scan.reasons = {{"first", "This is the first scan."}, {"readout", "..."}};
  CHECK(daemon::scan_line(scan) == "red night-41: apply, 125.34(12) kHz; first readout");
  scan.estimates = {{"rabi_hz", {}}, {"line_offset_hz", {-310.0, 25.0, -360.0, -260.0, ""}}};
  CHECK(daemon::scan_line(scan) == "red night-41: apply, line offset -310(25) Hz; first readout");
  scan.estimates = {{"rabi_per_amplitude_hz", {310e3, 4e3, 302e3, 318e3, ""}}};
  CHECK(daemon::scan_line(scan) == "red night-41: apply, 310(4) kHz per unit of amplitude; first readout");
}

TEST_CASE("a pipe that nobody empties costs lines and never makes the program wait") {
  int ends[2];
  REQUIRE(::pipe(ends) == 0);
  const auto lines = daemon::lines_to(ends[1], spdlog::level::info);
  // 10,000 lines are ten times what a pipe holds (pipe(7): 65,536 bytes).
  for (int i = 0; i < 10'000; ++i) lines->info("line {} {}", i, std::string(50, '.'));
  std::string text(1 << 20, '\0');
  text.resize(static_cast<std::size_t>(::read(ends[0], text.data(), text.size())));
  CHECK(text.find("line 0 ") != std::string::npos);
  CHECK(text.find("line 9999 ") == std::string::npos);
  CHECK(text.back() == '\n');

  lines->info("room again");
  std::string after(4096, '\0');
  after.resize(static_cast<std::size_t>(::read(ends[0], after.data(), after.size())));
  CHECK(after.find("lines before this one were lost") != std::string::npos);
  CHECK(after.find("Z info room again\n") != std::string::npos);
  ::close(ends[0]);
  ::close(ends[1]);
}
