// SPDX-License-Identifier: Apache-2.0
#include "plugin/log/memory_log.hpp"

#include <algorithm>
#include <iterator>

#include "plugin/log/check.hpp"

namespace halfturn::log {

Result<void> MemoryLog::begin() {
  if (open_) return tl::unexpected<Fault>(group_open_already());
  open_ = true;
  return {};
}

Result<void> MemoryLog::commit() {
  if (!open_) return tl::unexpected<Fault>(no_group());
  open_ = false;
  undo_.clear();
  return {};
}

void MemoryLog::roll_back() {
  for (auto step = undo_.rbegin(); step != undo_.rend(); ++step) (*step)();
  undo_.clear();
  open_ = false;
}

Result<std::int64_t> MemoryLog::append(const Event& event, const Bulk* bulk) {
  if (!open_) return tl::unexpected<Fault>(no_group());
  if (auto checked = check(event, bulk); !checked) return tl::unexpected<Fault>(checked.error());
  const auto number = static_cast<std::int64_t>(entries_.size()) + 1;
  entries_.push_back({event, bulk == nullptr ? std::nullopt : std::optional<Bulk>(*bulk)});
  entries_.back().event.number = number;
  undo_.push_back([this] { entries_.pop_back(); });
  return number;
}

Result<void> MemoryLog::keep_reply(const std::string& id, const StoredReply& reply, Time now) {
  if (!open_) return tl::unexpected<Fault>(no_group());
  const auto earlier = replies_.find(id);
  if (earlier != replies_.end() && earlier->second.reply.digest != reply.digest) return tl::unexpected<Fault>(id_reused(id));
  if (earlier != replies_.end()) return {};
  replies_[id] = {reply, now};
  undo_.push_back([this, id] { replies_.erase(id); });
  return {};
}

Result<std::optional<StoredReply>> MemoryLog::find_reply(const std::string& id) {
  const auto found = replies_.find(id);
  if (found == replies_.end()) return std::optional<StoredReply>();
  return std::optional<StoredReply>(found->second.reply);
}

Result<void> MemoryLog::forget_replies(Time before) {
  for (auto kept = replies_.begin(); kept != replies_.end();) {
    if (kept->second.at >= before) {
      ++kept;
      continue;
    }
    if (open_) undo_.push_back([this, gone = *kept] { replies_.insert(gone); });
    kept = replies_.erase(kept);
  }
  return {};
}

Result<void> MemoryLog::keep_configuration(const std::string& fingerprint, const std::string& text, Time) {
  if (configurations_.emplace(fingerprint, text).second && open_) {
    undo_.push_back([this, fingerprint] { configurations_.erase(fingerprint); });
  }
  return {};
}

Result<void> MemoryLog::replay(const std::function<void(const Event&)>& visit) {
  for (const auto& entry : entries_) visit(entry.event);
  return {};
}

std::vector<const MemoryLog::Entry*> MemoryLog::within(const Range& range, bool fits_alone) const {
  std::vector<const Entry*> found;
  for (const auto& entry : entries_) {
    const auto& event = entry.event;
    if (!range.drive.empty() && event.drive != range.drive) continue;
    if (fits_alone && event.kind != "fit") continue;
    if (range.since && event.happened_at < *range.since) continue;
    if (range.since && event.happened_at == *range.since && event.number <= range.after) continue;
    if (range.until && event.happened_at >= *range.until) continue;
    found.push_back(&entry);
  }
  const auto earlier = [](const Entry* a, const Entry* b) { return a->event.happened_at < b->event.happened_at; };
  std::stable_sort(found.begin(), found.end(), earlier);
  if (range.limit > 0) found.resize(std::min(found.size(), static_cast<std::size_t>(range.limit)));
  return found;
}

Result<std::vector<Log::Row>> MemoryLog::history(const Range& range) {
  std::vector<Row> rows;
  for (const auto* entry : within(range, true)) rows.push_back({entry->event, entry->bulk ? entry->bulk->reply : std::string()});
  return rows;
}

Result<std::vector<Event>> MemoryLog::events(const Range& range) {
  std::vector<Event> found;
  for (const auto* entry : within(range, false)) found.push_back(entry->event);
  return found;
}

Result<std::optional<std::string>> MemoryLog::scan(std::int64_t event_number) {
  if (event_number < 1 || event_number > static_cast<std::int64_t>(entries_.size())) return std::optional<std::string>();
  const auto& bulk = entries_[static_cast<std::size_t>(event_number - 1)].bulk;
  if (!bulk || bulk->scan.empty()) return std::optional<std::string>();
  return std::optional<std::string>(bulk->scan);
}

}  // namespace halfturn::log
