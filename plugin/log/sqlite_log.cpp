// SPDX-License-Identifier: Apache-2.0
#include "plugin/log/sqlite_log.hpp"

#include <array>
#include <filesystem>
#include <limits>
#include <optional>

#include "plugin/log/check.hpp"
#include "plugin/log/open.hpp"
#include "plugin/log/sqlite.hpp"
#include "plugin/log/writer_lock.hpp"

namespace halfturn::log {
namespace {

using sqlite::Database;
using sqlite::Query;

/// The columns of `event` beside its number, with the members that they hold: one list for writing and reading.
template <class T>
struct Column {
  const char* name;
  T Event::*member;
};
constexpr std::array<Column<Time>, 2> kTimes = {{{"happened_at", &Event::happened_at},
                                                  {"received_at", &Event::received_at}}};
constexpr std::array<Column<std::string>, 10> kTexts = {{{"drive", &Event::drive}, {"kind", &Event::kind}, {"id", &Event::id},
    {"scan_name", &Event::scan_name}, {"axis", &Event::axis}, {"verdict", &Event::verdict}, {"effect", &Event::effect},
    {"reasons", &Event::reasons}, {"by_whom", &Event::by}, {"why", &Event::why}}};
constexpr std::array<Column<double>, 23> kReals = {{{"rabi_hz", &Event::rabi_hz}, {"rabi_sigma_hz", &Event::rabi_sigma_hz},
    {"rabi_mean_hz", &Event::rabi_mean_hz}, {"rabi_mean_sigma_hz", &Event::rabi_mean_sigma_hz},
    {"rabi_low_hz", &Event::rabi_low_hz}, {"rabi_high_hz", &Event::rabi_high_hz}, {"generalised_hz", &Event::generalised_hz},
    {"generalised_sigma_hz", &Event::generalised_sigma_hz}, {"line_offset_hz", &Event::line_offset_hz},
    {"line_offset_sigma_hz", &Event::line_offset_sigma_hz}, {"line_width_hz", &Event::line_width_hz},
    {"carrier_hz", &Event::carrier_hz}, {"dead_time_s", &Event::dead_time_s},
    {"dead_time_sigma_s", &Event::dead_time_sigma_s}, {"dead_time_points_s", &Event::dead_time_points_s},
    {"dead_time_points_sigma_s", &Event::dead_time_points_sigma_s}, {"intensity_w_m2", &Event::intensity_w_m2},
    {"drive_amplitude", &Event::drive_amplitude}, {"span", &Event::span}, {"spacing", &Event::spacing},
    {"rabi_per_amplitude_hz", &Event::rabi_per_amplitude_hz},
    {"rabi_per_amplitude_sigma_hz", &Event::rabi_per_amplitude_sigma_hz}, {"compression", &Event::compression}}};

/// `happened_at, received_at, drive, ...`
std::string column_list() {
  std::string list;
  const auto add = [&list](const auto& columns) {
    for (const auto& column : columns) list += (list.empty() ? "" : ", ") + std::string(column.name);
  };
  add(kTimes);
  add(kTexts);
  add(kReals);
  return list;
}

std::string insertion() {
  std::string marks = "?";
  for (std::size_t i = 1; i < kTimes.size() + kTexts.size() + kReals.size(); ++i) marks += ", ?";
  return "INSERT INTO event (" + column_list() + ") VALUES (" + marks + ")";
}

const std::string kInsertEvent = insertion();
const std::string kSelectEvent = "SELECT number, " + column_list();

/// Events in the order of their time; `chosen` is a condition that ends in AND, `from` the tables.
std::string selection(const std::string& more, const std::string& from, const std::string& chosen) {
  return kSelectEvent + more + " FROM " + from + " WHERE " + chosen +
         " (happened_at, number) > (?, ?) AND happened_at <= ? ORDER BY happened_at, number LIMIT ?";
}

class SqliteLog final : public Log {
 public:
  SqliteLog(std::optional<WriterLock> lock, std::unique_ptr<Database> database)
      : lock_(std::move(lock)), database_(std::move(database)) {}
  ~SqliteLog() override { roll_back(); }

  Result<void> begin() override {
    if (!lock_) return fault("log_unavailable", "log", "The log was opened for reading alone; open it for writing to add to it.");
    if (database_->in_transaction()) return tl::unexpected<Fault>(group_open_already());
    return database_->run("BEGIN IMMEDIATE", "beginning to write");
  }

  Result<void> commit() override {
    if (!database_->in_transaction()) return tl::unexpected<Fault>(no_group());
    return or_roll_back(database_->run("COMMIT", "committing what was written"));
  }

  void roll_back() override {
    // Fails only where SQLite has rolled back by itself.
    if (database_->in_transaction()) (void)database_->run("ROLLBACK", "taking back what was written");
  }

  Result<std::int64_t> append(const Event& event, const Bulk* bulk) override {
    if (!database_->in_transaction()) return tl::unexpected<Fault>(no_group());
    if (auto checked = check(event, bulk); !checked) return tl::unexpected<Fault>(checked.error());
    if (auto done = or_roll_back(insert(event)); !done) return tl::unexpected<Fault>(done.error());
    const auto number = database_->last_row();
    auto done = insert_map("INSERT INTO pulse (event, name, length_s) VALUES (?, ?, ?)", number, event.pulses_s);
    if (done) done = insert_map("INSERT INTO pulse (event, name, amplitude) VALUES (?, ?, ?)", number, event.amplitudes);
    if (done && bulk != nullptr) done = insert(number, *bulk);
    if (auto kept = or_roll_back(std::move(done)); !kept) return tl::unexpected<Fault>(kept.error());
    return number;
  }

  Result<void> keep_reply(const std::string& id, const StoredReply& reply, Time now) override {
    if (!database_->in_transaction()) return tl::unexpected<Fault>(no_group());
    auto earlier = find_reply(id);
    if (!earlier) return or_roll_back(tl::unexpected<Fault>(earlier.error()));
    if (*earlier && (*earlier)->digest != reply.digest) return tl::unexpected<Fault>(id_reused(id));
    if (*earlier) return {};
    Query query(*database_, "INSERT INTO reply (id, digest, reply, kept_at) VALUES (?, ?, ?, ?)", "keeping a reply");
    return or_roll_back(query.put_text(id).put_text(reply.digest).put_blob(reply.reply).put(now).finish());
  }

  Result<std::optional<StoredReply>> find_reply(const std::string& id) override {
    Query query(*database_, "SELECT digest, reply FROM reply WHERE id = ?", "looking for an earlier reply");
    auto row = query.put_text(id).step();
    if (!row) return tl::unexpected<Fault>(row.error());
    if (!*row) return std::optional<StoredReply>();
    StoredReply reply;
    reply.digest = query.text();
    reply.reply = query.blob();
    return std::optional<StoredReply>(std::move(reply));
  }

  Result<void> forget_replies(Time before) override {
    Query query(*database_, "DELETE FROM reply WHERE kept_at < ?", "forgetting old replies");
    return or_roll_back(query.put(before).finish());
  }

  Result<void> keep_configuration(const std::string& fingerprint, const std::string& text, Time now) override {
    Query query(*database_, "INSERT OR IGNORE INTO configuration (fingerprint, text, kept_at) VALUES (?, ?, ?)",
                "keeping a configuration");
    return or_roll_back(query.put_text(fingerprint).put_text(text).put(now).finish());
  }

  Result<void> replay(const std::function<void(const Event&)>& visit) override {
    Query query(*database_, kSelectEvent + " FROM event ORDER BY number", "reading all events");
    return visit_events(query, [&](const Event& event, Query&) { visit(event); });
  }

  Result<std::vector<Row>> history(const Range& range) override {
    static const std::string kFrom = "event LEFT JOIN fit ON fit.event = event.number";
    static const std::string kOfAll = selection(", fit.reply", kFrom, "kind = 'fit' AND");
    static const std::string kOfDrive = selection(", fit.reply", kFrom, "drive = ? AND kind = 'fit' AND");
    std::vector<Row> rows;
    Query query(*database_, range.drive.empty() ? kOfAll : kOfDrive, "reading the history");
    auto done = visit_events(bind(query, range), [&](const Event& event, Query& row) {
      rows.push_back({event, row.blob()});
    });
    if (!done) return tl::unexpected<Fault>(done.error());
    return rows;
  }

  Result<std::vector<Event>> events(const Range& range) override {
    static const std::string kOfAll = selection("", "event", "");
    static const std::string kOfDrive = selection("", "event", "drive = ? AND");
    std::vector<Event> found;
    Query query(*database_, range.drive.empty() ? kOfAll : kOfDrive, "reading events");
    auto done = visit_events(bind(query, range), [&](const Event& event, Query&) { found.push_back(event); });
    if (!done) return tl::unexpected<Fault>(done.error());
    return found;
  }

  Result<std::optional<std::string>> scan(std::int64_t event_number) override {
    Query query(*database_, "SELECT scan FROM fit WHERE event = ? AND scan IS NOT NULL", "reading a scan");
    auto row = query.put(event_number).step();
    if (!row) return tl::unexpected<Fault>(row.error());
    if (!*row) return std::optional<std::string>();
    return std::optional<std::string>(query.blob());
  }

 private:
  Result<void> or_roll_back(Result<void> done) {
    if (!done) roll_back();
    return done;
  }

  Result<void> insert(const Event& event) {
    Query query(*database_, kInsertEvent, "storing an event");
    for (const auto& column : kTimes) query.put(event.*column.member);
    for (const auto& column : kTexts) query.put_text(event.*column.member);
    for (const auto& column : kReals) query.put(event.*column.member);
    return query.finish();
  }

  Result<void> insert(std::int64_t number, const Bulk& bulk) {
    {
      Query query(*database_, "INSERT INTO fit (event, scan, fingerprint, configuration, reply) VALUES (?, ?, ?, ?, ?)",
                  "storing a scan");
      query.put(number);
      if (bulk.scan.empty()) query.put_null();
      else query.put_blob(bulk.scan);
      auto done = query.put_text(bulk.fingerprint).put_text(bulk.configuration).put_blob(bulk.reply).finish();
      if (!done) return done;
    }
    return insert_map("INSERT INTO ambient (event, name, value) VALUES (?, ?, ?)", number, bulk.ambient);
  }

  Result<void> insert_map(const char* sql, std::int64_t number, const std::map<std::string, double>& values) {
    if (values.empty()) return {};
    Query query(*database_, sql, "storing an event");
    for (const auto& [name, value] : values) {
      if (auto done = query.put(number).put_text(name).put(value).finish(); !done) return done;
    }
    return {};
  }

  static Query& bind(Query& query, const Range& range) {
    constexpr auto kEver = std::numeric_limits<Time>::max();
    constexpr auto kNever = std::numeric_limits<Time>::min();
    if (!range.drive.empty()) query.put_text(range.drive);
    query.put(range.since.value_or(kNever)).put(range.since ? range.after : 0);
    const bool nothing = range.until == kNever;
    query.put(range.until && !nothing ? *range.until - 1 : kEver);
    const std::int64_t limit = range.limit > 0 ? range.limit : -1;
    return query.put(nothing ? 0 : limit);
  }

  template <class Visit>
  Result<void> visit_events(Query& query, Visit visit) {
    for (;;) {
      auto row = query.step();
      if (!row) return tl::unexpected<Fault>(row.error());
      if (!*row) return {};
      Event event;
      event.number = query.integer();
      for (const auto& column : kTimes) event.*column.member = query.integer();
      for (const auto& column : kTexts) event.*column.member = query.text();
      for (const auto& column : kReals) event.*column.member = query.real();
      if (auto done = read_pulses(event); !done) return done;
      visit(event, query);
    }
  }

  Result<void> read_pulses(Event& event) {
    Query query(*database_, "SELECT name, length_s, amplitude, amplitude IS NOT NULL FROM pulse WHERE event = ?", "reading pulses");
    query.put(event.number);
    for (;;) {
      auto row = query.step();
      if (!row) return tl::unexpected<Fault>(row.error());
      if (!*row) return {};
      const std::string name = query.text();
      const double length_s = query.real(), amplitude = query.real();
      if (query.integer() != 0) event.amplitudes[name] = amplitude;
      else event.pulses_s[name] = length_s;
    }
  }

  std::optional<WriterLock> lock_;  // released after the connection is closed
  std::unique_ptr<Database> database_;
};

/// The file's one true name: absolute, links resolved, so that two names of a file share a lock.
std::string true_name(const std::string& path) {
  std::error_code error;
  const auto name = std::filesystem::weakly_canonical(std::filesystem::absolute(path, error), error);
  return error ? path : name.string();
}

}  // namespace

Result<std::unique_ptr<Log>> open(const std::string& path, Access access) {
  if (path.empty()) return fault("log_unavailable", "log", "found no path, expected the path of the log file");
  const std::string name = true_name(path);
  if (std::error_code error; std::filesystem::is_directory(name, error)) {
    return fault("log_unavailable", name, name + " is a folder. Give the path of a file in it.");
  }
  std::optional<WriterLock> lock;
  if (access == Access::read_write) {
    auto taken = WriterLock::take(name);
    if (!taken) return tl::unexpected<Fault>(taken.error());
    lock.emplace(std::move(*taken));
  }
  auto database = access == Access::read_write ? open_to_write(name) : open_to_read(name);
  if (!database) return tl::unexpected<Fault>(database.error());
  return std::unique_ptr<Log>(std::make_unique<SqliteLog>(std::move(lock), std::move(*database)));
}

}  // namespace halfturn::log
