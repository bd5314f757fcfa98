// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "model/quantity/result.hpp"
#include "plugin/wire/decode.hpp"
#include "plugin/wire/events.hpp"
#include "plugin/wire/values.hpp"

namespace halfturn::wire {

/// Takes the events of both encodings and fills the known fields, checking names, types, limits, UTF-8, unique keys and
/// finite numbers as they come. After a first fault it keeps no values but `proto`, `kind` and `id` of the request, so that
/// the reply to a faulty request can carry its id.
class Sink : public Events {
 public:
  Sink(const DecodeLimits& limits, Map root);

  bool null() override;
  bool flag(bool value) override;
  bool integer(std::int64_t value) override { return number(static_cast<double>(value)); }
  bool number(double value) override;
  bool text(std::string_view value) override;
  bool time(Time value) override;
  bool alien(std::string_view what) override;
  bool open_map() override;
  bool key(std::string_view name) override;
  bool close_map() override;
  bool open_list() override;
  bool close_list() override;

  /// Where the reading stands: `scan.counts[3]`; empty at the top.
  std::string place() const;

  /// Notes a fault here unless there is one; returns true (the reading goes on for the sake of the id).
  bool fail(std::string code, std::string message);

  Values& values() { return root_; }
  const std::optional<Fault>& fault() const { return fault_; }
  bool stopped() const { return stopped_; }  // by a fault that ended the reading: the top is no map, or too deep

 private:
  enum class Level { map, named, list, rows, texts, maps };
  struct Frame {
    Level level;
    Map map = Map::request;          // map
    Values* values = nullptr;        // map
    std::optional<Field> field;      // map: the one whose value comes
    Value* value = nullptr;          // the others: what they fill
    std::string name;                // named: the entry whose value comes
    std::size_t count = 0;           // lists: members begun
  };

  bool enter();
  bool stop(std::string code, std::string message);
  bool skim() const { return fault_.has_value(); }
  bool wrong_type(const std::string& found);
  void count_faulty_member();
  std::string expected() const;
  Value* begin_value(Shape shape);
  bool map_key(std::string_view name);
  bool named_key(std::string_view name);
  bool list_number(double value);
  bool next_member(std::size_t limit, std::string_view what);
  void skim_text(std::string_view value);
  void skim_number(double value);

  DecodeLimits limits_;
  Map root_map_;
  Values root_;
  std::vector<Frame> frames_;
  std::size_t depth_ = 0;
  std::optional<Field> top_field_;  // proto, kind or id while its value comes at the top
  std::optional<Fault> fault_;
  bool stopped_ = false;
};

}  // namespace halfturn::wire
