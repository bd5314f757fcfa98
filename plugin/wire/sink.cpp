// SPDX-License-Identifier: Apache-2.0
#include "plugin/wire/sink.hpp"

#include <cmath>
#include <limits>

#include "plugin/wire/time.hpp"
#include "plugin/wire/words.hpp"

namespace halfturn::wire {
namespace {

std::vector<std::string_view> names_in(Map map) {
  std::vector<std::string_view> names;
  for (const FieldRow& field : kFieldTable)
    if (field.maps >> static_cast<unsigned>(map) & 1u) names.push_back(field.name);
  return names;
}

constexpr std::string_view kTimeForm = "an RFC 3339 time with its offset, such as \"2026-02-03T04:05:06Z\"";

std::string_view words_for(Shape shape) {
  switch (shape) {
    case Shape::number: return "a number";
    case Shape::flag: return "true or false";
    case Shape::text: return "a text";
    case Shape::time: return kTimeForm;
    case Shape::numbers: return "a list of numbers";
    case Shape::rows: return "a number, a list of numbers, or one such list for each site";
    case Shape::texts: return "a list of texts";
    case Shape::named_numbers: return "a map of names to numbers";
    case Shape::map: return "a map";
    case Shape::maps: return "a list of scans";
  }
  return "a value";
}

std::optional<Map> map_under(Field field) {
  if (field == Field::scan) return Map::scan;
  if (field == Field::references) return Map::references;
  if (field == Field::options) return Map::options;
  return std::nullopt;
}

}  // namespace

Sink::Sink(const DecodeLimits& limits, Map root) : limits_(limits), root_map_(root) {}

std::string Sink::place() const {
  std::string path;
  for (const Frame& frame : frames_) {
    if (frame.level == Level::map && frame.field) path += (path.empty() ? "" : ".") + std::string(wire::name(*frame.field));
    if (frame.level == Level::named && !frame.name.empty()) path += "." + frame.name;
    const bool is_list = frame.level != Level::map && frame.level != Level::named;
    if (is_list && frame.count > 0) path += "[" + std::to_string(frame.count - 1) + "]";
  }
  return path;
}

bool Sink::fail(std::string code, std::string message) {
  if (!fault_) fault_ = Fault{std::move(code), place(), std::move(message)};
  return true;
}

bool Sink::stop(std::string code, std::string message) {
  fault_ = Fault{std::move(code), skim() ? std::string{} : place(), std::move(message)};
  stopped_ = true;
  return false;
}

std::string Sink::expected() const {
  const Frame& top = frames_.back();
  if (top.level == Level::map) return std::string(top.field ? words_for(row(*top.field).shape) : "a value");
  if (top.level == Level::texts) return "a text";
  if (top.level == Level::maps) return "a scan (a map)";
  if (top.level == Level::rows) return "a list of numbers";
  return "a number";
}

bool Sink::wrong_type(const std::string& found) {
  count_faulty_member();
  return fail("bad_type", "found " + found + ", expected " + expected());
}

/// So that the place names the member that is at fault.
void Sink::count_faulty_member() {
  Frame& top = frames_.back();
  if (top.level != Level::map && top.level != Level::named) ++top.count;
}

/// The value of the current field where it has the shape; null otherwise.
Value* Sink::begin_value(Shape shape) {
  Frame& top = frames_.back();
  if (top.level != Level::map || row(*top.field).shape != shape) return nullptr;
  return &top.values->add(*top.field);
}

bool Sink::null() {
  if (depth_ == 0) return stop("bad_encoding", "found null, expected a map");
  if (skim()) return true;
  const Frame& top = frames_.back();
  const bool in_rows = top.level == Level::list && top.field && row(*top.field).shape == Shape::rows;
  if (in_rows) return list_number(std::numeric_limits<double>::quiet_NaN());
  if (top.level == Level::map)
    return fail("bad_type", "found null, expected " + expected() + "; leave the field out where it has no value");
  return wrong_type("null");
}

bool Sink::flag(bool value) {
  if (depth_ == 0) return stop("bad_encoding", "found true or false, expected a map");
  if (skim()) return true;
  Value* into = begin_value(Shape::flag);
  if (into == nullptr) return wrong_type(value ? "true" : "false");
  into->flag = value;
  return true;
}

bool Sink::number(double value) {
  if (depth_ == 0) return stop("bad_encoding", "found a number, expected a MessagePack map, or JSON that begins with {");
  if (skim()) {
    skim_number(value);
    return true;
  }
  if (!std::isfinite(value)) {
    count_faulty_member();
    return fail("bad_value", "found " + number_text(value) + ", expected a finite number");
  }
  Frame& top = frames_.back();
  if (top.level == Level::list || top.level == Level::rows) return list_number(value);
  if (top.level == Level::named) {
    top.value->named.emplace(top.name, value);
    return true;
  }
  Value* into = begin_value(Shape::number);
  if (into == nullptr) into = begin_value(Shape::rows);
  if (into == nullptr) return wrong_type("the number " + number_text(value));
  into->number = value;
  return true;
}

bool Sink::text(std::string_view value) {
  if (depth_ == 0) return stop("bad_encoding", "found a text, expected a map");
  if (skim()) {
    skim_text(value);
    return true;
  }
  Frame& top = frames_.back();
  if (top.level == Level::texts && !next_member(top.field == Field::sites ? limits_.sites : 100, "entries")) return true;
  if (value.size() > limits_.text)
    return fail("too_large", "found a text of " + std::to_string(value.size()) + " bytes, expected at most " +
                                 std::to_string(limits_.text));
  if (!is_utf8(value)) return fail("bad_encoding", "found bytes that are no UTF-8, expected a text");
  if (top.level == Level::texts) {
    top.value->texts.emplace_back(value);
    return true;
  }
  if (top.level == Level::map && row(*top.field).shape == Shape::time) {
    const auto when = parse_time(value);
    if (!when) return fail("bad_value", "found " + in_quotes(value) + ", expected " + std::string(kTimeForm));
    top.values->add(*top.field).time = *when;
    return true;
  }
  Value* into = begin_value(Shape::text);
  if (into == nullptr) return wrong_type("the text " + in_quotes(value));
  into->text = value;
  return true;
}

bool Sink::time(Time value) {
  if (depth_ == 0) return stop("bad_encoding", "found a timestamp, expected a map");
  if (skim()) return true;
  Value* into = begin_value(Shape::time);
  if (into == nullptr) return wrong_type("a timestamp");
  into->time = value;
  return true;
}

bool Sink::alien(std::string_view what) {
  if (depth_ == 0) return stop("bad_encoding", "found " + std::string(what) + ", expected a map");
  return skim() || wrong_type(std::string(what));
}

bool Sink::enter() {
  if (++depth_ <= limits_.depth) return true;
  return stop("too_large", "maps and lists are nested deeper than " + std::to_string(limits_.depth) + " levels");
}

bool Sink::open_map() {
  if (!enter()) return false;
  if (skim()) return true;
  if (depth_ == 1) {
    frames_.push_back({Level::map, root_map_, &root_, {}, nullptr, {}, 0});
    return true;
  }
  Frame& top = frames_.back();
  if (top.level == Level::maps) {
    if (!next_member(limits_.scans, "scans")) return true;
    Values& scan = top.value->maps.emplace_back();
    frames_.push_back({Level::map, Map::scan, &scan, {}, nullptr, {}, 0});
    return true;
  }
  if (Value* map = begin_value(Shape::map)) {
    Values& inner = map->maps.emplace_back();
    frames_.push_back({Level::map, *map_under(*top.field), &inner, {}, nullptr, {}, 0});
    return true;
  }
  if (Value* named = begin_value(Shape::named_numbers)) {
    frames_.push_back({Level::named, Map::request, nullptr, top.field, named, {}, 0});
    return true;
  }
  return wrong_type("a map");
}

bool Sink::key(std::string_view key_name) {
  if (depth_ == 1) {
    top_field_.reset();
    if (root_map_ == Map::request)
      for (const Field field : {Field::proto, Field::kind, Field::id})
        if (wire::name(field) == key_name) top_field_ = field;
  }
  if (skim()) return true;
  Frame& top = frames_.back();
  top.field = top.level == Level::map ? std::nullopt : top.field;
  top.name.clear();
  if (key_name.size() > limits_.text || !is_utf8(key_name))
    return fail(key_name.size() > limits_.text ? "too_large" : "bad_encoding",
                "found a key that is too long or no UTF-8, expected the name of a field");
  return top.level == Level::map ? map_key(key_name) : named_key(key_name);
}

bool Sink::map_key(std::string_view key_name) {
  Frame& top = frames_.back();
  const auto field = field_named(key_name, top.map);
  if (!field) {
    const auto known = names_in(top.map);
    const std::string around = place();
    fail("unknown_field", "found the unknown field " + in_quotes(key_name) + "; the nearest known one is `" +
                              std::string(nearest(key_name, known)) + "`");
    fault_->where += is_printable(key_name, 64) ? (around.empty() ? "" : ".") + std::string(key_name) : "";
    return true;
  }
  top.field = field;
  if (top.values->has(*field)) return fail("bad_value", "found this field twice, expected it once");
  return true;
}

bool Sink::named_key(std::string_view key_name) {
  Frame& top = frames_.back();
  if (top.value->named.size() >= limits_.names)
    return fail("too_large", "found more than " + std::to_string(limits_.names) + " entries, expected at most so many");
  if (!is_printable(key_name, 128))
    return fail("bad_value", "found the name " + in_quotes(key_name) + ", expected 1 to 128 printable characters");
  top.name = key_name;
  if (top.value->named.contains(key_name)) return fail("bad_value", "found this name twice, expected it once");
  return true;
}

bool Sink::close_map() {
  --depth_;
  if (skim()) return true;
  frames_.pop_back();
  return true;
}

bool Sink::open_list() {
  if (depth_ == 0) return stop("bad_encoding", "found a list, expected a map");
  if (!enter()) return false;
  if (skim()) return true;
  Frame& top = frames_.back();
  if (top.level == Level::list && top.count == 0 && row(*top.field).shape == Shape::rows &&
      top.value->form == Value::Form::list) {
    top.level = Level::rows;  // a list that begins with a list is a list of rows
    top.value->form = Value::Form::rows;
    top.value->rows.clear();
  }
  if (top.level == Level::rows) {
    if (!next_member(limits_.sites, "rows")) return true;
    top.value->rows.emplace_back();
    frames_.push_back({Level::list, Map::request, nullptr, top.field, top.value, {}, 0});
    return true;
  }
  if (top.level == Level::map) {
    const Shape shape = row(*top.field).shape;
    if (shape == Shape::numbers || shape == Shape::rows) {
      Value* value = begin_value(shape);
      value->form = Value::Form::list;
      value->rows.emplace_back();
      frames_.push_back({Level::list, Map::request, nullptr, top.field, value, {}, 0});
      return true;
    }
    if (shape == Shape::texts || shape == Shape::maps) {
      frames_.push_back(
          {shape == Shape::texts ? Level::texts : Level::maps, Map::request, nullptr, top.field, begin_value(shape), {}, 0});
      return true;
    }
  }
  return wrong_type("a list");
}

bool Sink::close_list() {
  --depth_;
  if (skim()) return true;
  frames_.pop_back();
  return true;
}

/// Counts a member of the innermost list; false, with a fault, past the limit.
bool Sink::next_member(std::size_t limit, std::string_view what) {
  Frame& top = frames_.back();
  if (top.count < limit) {
    ++top.count;
    return true;
  }
  top.count = 0;
  fail("too_large", "found more than " + std::to_string(limit) + " " + std::string(what) + ", expected at most so many");
  return false;
}

bool Sink::list_number(double value) {
  Frame& top = frames_.back();
  if (top.level == Level::rows) {
    ++top.count;
    return fail("bad_shape", "found a number among rows, expected one list of numbers for each site");
  }
  if (next_member(limits_.points, "points")) top.value->rows.back().push_back(value);
  return true;
}

void Sink::skim_text(std::string_view value) {
  if (depth_ != 1 || !top_field_ || root_.has(*top_field_) || row(*top_field_).shape != Shape::text) return;
  if (value.size() <= limits_.text && is_utf8(value)) root_.add(*top_field_).text = value;
}

void Sink::skim_number(double value) {
  if (depth_ == 1 && top_field_ == Field::proto && !root_.has(Field::proto)) root_.add(Field::proto).number = value;
}

}  // namespace halfturn::wire
