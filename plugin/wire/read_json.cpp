// SPDX-License-Identifier: Apache-2.0
#include <limits>
#include <nlohmann/json.hpp>

#include "plugin/wire/events.hpp"
#include "plugin/wire/words.hpp"

namespace halfturn::wire {
namespace {

using Json = nlohmann::json;

/// Turns the JSON parser's calls into events.
class Sax : public nlohmann::json_sax<Json> {
 public:
  explicit Sax(Events& events) : events_(events) {}

  bool null() override { return events_.null(); }
  bool boolean(bool value) override { return events_.flag(value); }
  bool number_integer(number_integer_t value) override { return events_.integer(value); }
  bool number_unsigned(number_unsigned_t value) override {
    if (value > static_cast<number_unsigned_t>(std::numeric_limits<std::int64_t>::max()))
      return events_.number(static_cast<double>(value));
    return events_.integer(static_cast<std::int64_t>(value));
  }
  bool number_float(number_float_t value, const string_t&) override { return events_.number(value); }
  bool string(string_t& value) override { return events_.text(value); }
  bool binary(binary_t&) override { return events_.alien("binary data"); }
  bool start_object(std::size_t) override { return events_.open_map(); }
  bool key(string_t& value) override { return events_.key(value); }
  bool end_object() override { return events_.close_map(); }
  bool start_array(std::size_t) override { return events_.open_list(); }
  bool end_array() override { return events_.close_list(); }
  bool parse_error(std::size_t position, const std::string& last, const nlohmann::detail::exception& problem) override {
    constexpr int kNumberOverflow = 406;  // nlohmann's documented exception id
    constexpr double kInfinity = std::numeric_limits<double>::infinity();
    if (problem.id == kNumberOverflow) events_.number(last.starts_with('-') ? -kInfinity : kInfinity);
    else end = {ReadEnd::How::broken, "no JSON at byte " + std::to_string(position) + ", after " + tail(last)};
    return false;
  }

  ReadEnd end;

 private:
  static std::string tail(const std::string& last) {
    constexpr std::size_t kShown = 30;
    return last.empty() ? "the start" : in_quotes(last.size() > kShown ? last.substr(last.size() - kShown) : last);
  }

  Events& events_;
};

}  // namespace

ReadEnd read_json(std::string_view bytes, Events& events) {
  Sax sax(events);
  try {
    if (Json::sax_parse(bytes.begin(), bytes.end(), &sax)) return {};
  } catch (const std::exception& problem) {
    return {ReadEnd::How::broken, problem.what()};
  }
  if (sax.end.how == ReadEnd::How::complete) return {ReadEnd::How::stopped, {}};
  return sax.end;
}

}  // namespace halfturn::wire
