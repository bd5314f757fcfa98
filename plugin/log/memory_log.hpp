// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <map>
#include <optional>
#include <string>
#include <utility>
#include <vector>

#include "plugin/log/log.hpp"

namespace halfturn::log {

/// A log that lives as long as its object: for fits that are not stored, for simulated campaigns, and the oracle that the file
/// is tested against. Never unavailable.
class MemoryLog final : public Log {
 public:
  Result<void> begin() override;
  Result<void> commit() override;
  void roll_back() override;
  Result<std::int64_t> append(const Event& event, const Bulk* bulk) override;
  Result<void> keep_reply(const std::string& id, const StoredReply& reply, Time now) override;
  Result<std::optional<StoredReply>> find_reply(const std::string& id) override;
  Result<void> forget_replies(Time before) override;
  Result<void> keep_configuration(const std::string& fingerprint, const std::string& text, Time now) override;
  Result<void> replay(const std::function<void(const Event&)>& visit) override;
  Result<std::vector<Row>> history(const Range& range) override;
  Result<std::vector<Event>> events(const Range& range) override;
  Result<std::optional<std::string>> scan(std::int64_t event_number) override;

 private:
  struct Entry {
    Event event;
    std::optional<Bulk> bulk;
  };
  struct Kept {
    StoredReply reply;
    Time at = 0;
  };

  std::vector<const Entry*> within(const Range& range, bool fits_alone) const;

  std::vector<Entry> entries_;  // entries_[i] has the number i + 1
  std::map<std::string, Kept> replies_;
  std::map<std::string, std::string> configurations_;
  bool open_ = false;
  std::vector<std::function<void()>> undo_;  // of the open group, to be run from the back
};

}  // namespace halfturn::log
