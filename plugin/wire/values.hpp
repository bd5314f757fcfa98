// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <map>
#include <memory>
#include <string>
#include <utility>
#include <vector>

#include "plugin/wire/fields.hpp"

/// The fields of one map as they came, checked each by itself and not yet against one another.
namespace halfturn::wire {

struct Entry;

/// Fields in the order of their arrival, each at most once.
class Values {
 public:
  Values();
  ~Values();
  Values(Values&&) noexcept;
  Values& operator=(Values&&) noexcept;

  /// The value of a field; null where it did not come.
  struct Value* find(Field field);
  const Value* find(Field field) const;
  bool has(Field field) const { return find(field) != nullptr; }

  /// Adds a field that is not there yet.
  Value& add(Field field);

  const std::vector<Entry>& entries() const { return entries_; }

 private:
  std::vector<Entry> entries_;
};

/// What came under a field; which members mean something follows from its Shape.
struct Value {
  double number = 0;
  bool flag = false;
  Time time = 0;
  std::string text;
  enum class Form { single, list, rows } form = Form::single;  // of Shape::rows
  std::vector<std::vector<double>> rows;                       // numbers and rows; NaN where null came
  std::vector<std::string> texts;
  std::map<std::string, double, std::less<>> named;
  std::vector<Values> maps;
};

struct Entry {
  Field field;
  Value value;
};

}  // namespace halfturn::wire
