// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <optional>
#include <string>

#include "model/quantity/result.hpp"
#include "plugin/wire/values.hpp"

/// The checks of a whole message: what its kind needs, and one field against another.
namespace halfturn::wire {

/// Reads fields out of one map and keeps the first fault. After a fault it goes on with defaults.
class Checker {
 public:
  Checker(Values& values, std::string prefix, std::optional<Fault>& fault)
      : values_(values), prefix_(std::move(prefix)), fault_(fault) {}

  bool has(Field field) const { return values_.has(field); }
  Value* find(Field field) { return values_.find(field); }
  std::string place(Field field) const;
  std::string place(Field field, std::size_t i) const { return place(field) + "[" + std::to_string(i) + "]"; }
  const std::string& prefix() const { return prefix_; }
  bool failed() const { return fault_.has_value(); }
  std::optional<Fault>& fault() { return fault_; }

  void fail(std::string code, std::string where, std::string message);

  /// Fails on the first field that is not in the set; `owner` names the map in the sentence ("a `fit`").
  void allow_only(const FieldSet& allowed, const std::string& owner);
  void need(Field field, const std::string& why);

  /// A number in the range, with its ends; the sentence names `what` ("a number above 0").
  std::optional<double> number(Field field, double least, double most, const std::string& what);
  /// A finite number above 0.
  std::optional<double> positive(Field field);
  std::optional<double> any_number(Field field);
  /// A whole number in the range, with its ends.
  std::optional<std::int64_t> whole(Field field, std::int64_t least, std::int64_t most);
  /// A text of 1 to `most` printable characters; empty where it did not come.
  std::string printable(Field field, std::size_t most);
  /// A name of a drive; empty where it did not come.
  std::string name_of_drive(Field field);
  std::optional<Time> time(Field field);

 private:
  Values& values_;
  std::string prefix_;
  std::optional<Fault>& fault_;
};

/// The largest whole number that a double holds exactly with all below it, 2^53.
inline constexpr double kLargestWhole = 9007199254740992.0;

/// Whether the number is whole and in 0 ... 2^53.
bool is_count(double value);

/// What of a scan a message holds.
enum class ScanPart { whole, without_data, data };

/// Builds the scan of a map with the fields of `part`; the first fault goes to the checker.
void check_scan(Checker& in, ScanPart part, Scan& scan);

/// Builds the readout of a scan whose axis is built: fills readout_kind, observed and weight.
void check_readout(Checker& in, ScanPart part, Scan& scan);

/// Builds the request of the fields at the top of a message.
Result<Request> check_request(Values& values);

}  // namespace halfturn::wire
