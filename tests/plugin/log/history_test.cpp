// SPDX-License-Identifier: Apache-2.0
// Random histories: the file must answer every question as the log in memory does, also after being closed and opened again.
#include <algorithm>
#include <memory>

#include "plugin/log/memory_log.hpp"
#include "plugin/log/sqlite_log.hpp"
#include "tests/support/catch.hpp"
#include "tests/support/folder.hpp"
#include "tests/support/log_samples.hpp"

using namespace halfturn;
using namespace halfturn::log;
using tests::LogSamples;

namespace {

bool same_events(const std::vector<Event>& ours, const std::vector<Event>& theirs) {
  return std::equal(ours.begin(), ours.end(), theirs.begin(), theirs.end(),
                    [](const auto& a, const auto& b) { return tests::same(a, b); });
}

class Pair {
 public:
  explicit Pair(std::string path) : path_(std::move(path)) { reopen(); }

  void reopen() {
    file_.reset();
    auto opened = log::open(path_, Access::read_write);
    INFO((opened ? std::string() : opened.error().message));
    REQUIRE(opened);
    file_ = std::move(*opened);
  }

  /// A group of 0 to 5 writes, one time in four taken back.
  void write(LogSamples& samples) {
    REQUIRE(file_->begin());
    REQUIRE(memory_.begin());
    for (auto left = samples.whole(0, 5); left > 0; --left) {
      if (samples.whole(0, 2) == 0) keep_reply(samples);
      else append(samples);
    }
    if (samples.whole(0, 9) == 0) forget(samples);
    if (samples.whole(0, 3) == 0) {
      file_->roll_back();
      memory_.roll_back();
    } else {
      REQUIRE(file_->commit());
      REQUIRE(memory_.commit());
    }
  }

  void forget(LogSamples& samples) {
    const auto before = samples.whole(0, 60);
    REQUIRE(file_->forget_replies(before));
    REQUIRE(memory_.forget_replies(before));
  }

  void compare(LogSamples& samples) {
    Range range;
    if (samples.whole(0, 1) == 0) range.drive = samples.drive();
    if (samples.whole(0, 1) == 0) range.since = samples.whole(-6, 41);
    if (samples.whole(0, 1) == 0) range.until = samples.whole(-6, 41);
    if (samples.whole(0, 1) == 0) range.after = samples.whole(0, 60);
    range.limit = samples.whole(0, 12);
    compare_events(range);
    compare_history(range);
    const auto number = samples.whole(-1, 200);
    CHECK(file_->scan(number).value() == memory_.scan(number).value());
    const auto id = "id-" + std::to_string(samples.whole(0, 20));
    compare_reply(id);
  }

  void compare_all() {
    std::vector<Event> ours, theirs;
    REQUIRE(file_->replay([&](const Event& event) { ours.push_back(event); }));
    REQUIRE(memory_.replay([&](const Event& event) { theirs.push_back(event); }));
    CHECK(same_events(ours, theirs));
    for (std::size_t i = 0; i < ours.size(); ++i) REQUIRE(ours[i].number == static_cast<std::int64_t>(i) + 1);
    for (int id = 0; id <= 20; ++id) compare_reply("id-" + std::to_string(id));
  }

 private:
  void append(LogSamples& samples) {
    const auto event = samples.event();
    const auto bulk = samples.bulk();
    const Bulk* given = event.kind == "fit" && samples.whole(0, 4) != 0 ? &bulk : nullptr;
    const auto ours = file_->append(event, given);
    INFO((ours ? std::string() : ours.error().message));
    REQUIRE(ours);
    CHECK(*ours == memory_.append(event, given).value());
  }

  void keep_reply(LogSamples& samples) {
    const auto id = "id-" + std::to_string(samples.whole(0, 20));
    const StoredReply reply{std::to_string(samples.whole(0, 1)), samples.bytes(100)};
    const auto now = samples.whole(0, 60);
    const auto ours = file_->keep_reply(id, reply, now);
    const auto theirs = memory_.keep_reply(id, reply, now);
    REQUIRE(ours.has_value() == theirs.has_value());
    if (!ours) CHECK(ours.error().code == theirs.error().code);
  }

  void compare_reply(const std::string& id) {
    const auto ours = file_->find_reply(id).value();
    const auto theirs = memory_.find_reply(id).value();
    REQUIRE(ours.has_value() == theirs.has_value());
    if (!ours) return;
    CHECK(ours->digest == theirs->digest);
    CHECK(ours->reply == theirs->reply);
  }

  void compare_events(const Range& range) {
    const auto ours = file_->events(range).value();
    const auto theirs = memory_.events(range).value();
    CHECK(same_events(ours, theirs));
  }

  void compare_history(const Range& range) {
    const auto ours = file_->history(range).value();
    const auto theirs = memory_.history(range).value();
    CHECK(std::equal(ours.begin(), ours.end(), theirs.begin(), theirs.end(),
                     [](const auto& a, const auto& b) { return tests::same(a.event, b.event) && a.reply == b.reply; }));
  }

  std::string path_;
  std::unique_ptr<Log> file_;
  MemoryLog memory_;
};

}  // namespace

TEST_CASE("the file and the memory hold the same random history, reopened every hundred steps") {
  for (const std::uint64_t seed : {1u, 2u, 3u, 4u}) {
    tests::Folder folder;
    Pair pair(folder / "nights.db");
    LogSamples samples(seed);
    for (int step = 1; step <= 400; ++step) {
      INFO("seed " << seed << ", step " << step);
      pair.write(samples);
      if (samples.whole(0, 19) == 0) pair.forget(samples);
      pair.compare(samples);
      if (step % 100 == 0) {
        pair.reopen();
        pair.compare_all();
      }
    }
  }
}

TEST_CASE("pages of a history join without a gap or a double, also among equal times") {
  tests::Folder folder;
  auto file = log::open(folder / "nights.db", Access::read_write).value();
  LogSamples samples(11);
  REQUIRE(file->begin());
  for (int i = 0; i < 300; ++i) REQUIRE(file->append(samples.event(), nullptr));
  REQUIRE(file->commit());

  Range range;
  range.limit = 0;
  const auto whole = file->history(range).value();
  REQUIRE(whole.size() > 100);
  std::vector<std::int64_t> numbers;
  range.limit = 7;
  for (auto page = file->history(range).value(); !page.empty(); page = file->history(range).value()) {
    for (const auto& row : page) numbers.push_back(row.event.number);
    range.since = page.back().event.happened_at;
    range.after = page.back().event.number;
  }
  REQUIRE(numbers.size() == whole.size());
  for (std::size_t i = 0; i < whole.size(); ++i) CHECK(numbers[i] == whole[i].event.number);
}

TEST_CASE("a reply is found for seven days by its id, and the first one stands") {
  tests::Folder folder;
  constexpr Time kDay = 86'400'000'000'000;
  std::vector<std::unique_ptr<Log>> logs;
  logs.push_back(log::open(folder / "nights.db", Access::read_write).value());
  logs.push_back(std::make_unique<MemoryLog>());
  for (auto& each : logs) {
    REQUIRE(each->begin());
    REQUIRE(each->keep_reply("a", {"digest-1", std::string("reply\0one", 9)}, 10 * kDay));
    REQUIRE(each->keep_reply("b", {"digest-2", "reply two"}, 11 * kDay));
    CHECK(each->keep_reply("a", {"digest-1", "another"}, 12 * kDay));
    const auto other = each->keep_reply("a", {"digest-9", "another"}, 12 * kDay);
    REQUIRE_FALSE(other);
    CHECK(other.error().code == "id_reused");
    REQUIRE(each->commit());  // misuse leaves the group as it was

    CHECK(each->find_reply("a").value()->reply == std::string("reply\0one", 9));
    CHECK(each->find_reply("a").value()->digest == "digest-1");
    CHECK_FALSE(each->find_reply("c").value());
    REQUIRE(each->forget_replies(17 * kDay - 7 * kDay));
    CHECK(each->find_reply("a").value());
    REQUIRE(each->forget_replies(17 * kDay + 1 - 7 * kDay));
    CHECK_FALSE(each->find_reply("a").value());
    CHECK(each->find_reply("b").value());
  }
}

TEST_CASE("misuse is a fault in words and spoils nothing") {
  tests::Folder folder;
  std::vector<std::unique_ptr<Log>> logs;
  logs.push_back(log::open(folder / "nights.db", Access::read_write).value());
  logs.push_back(std::make_unique<MemoryLog>());
  LogSamples samples(3);
  for (auto& each : logs) {
    auto event = samples.event();
    CHECK(each->append(event, nullptr).error().code == "internal");
    CHECK(each->commit().error().code == "internal");
    REQUIRE(each->begin());
    CHECK(each->begin().error().code == "internal");
    event.kind = "guess";
    CHECK(each->append(event, nullptr).error().code == "bad_value");
    event.kind = "hold";
    const auto bulk = samples.bulk();
    CHECK(each->append(event, &bulk).error().code == "bad_value");
    event.drive = "";
    CHECK(each->append(event, nullptr).error().where == "event.drive");
    event.drive = "red";
    CHECK(each->append(event, nullptr).value() == 1);
    REQUIRE(each->commit());
    CHECK(each->events({}).value().size() == 1);
  }
}
