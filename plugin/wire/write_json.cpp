// SPDX-License-Identifier: Apache-2.0
#include "plugin/wire/write_json.hpp"

#include <nlohmann/json.hpp>

#include "plugin/wire/words.hpp"

namespace halfturn::wire {
namespace {

class JsonWriter : public BytesWriter {
 public:
  void open_map() override { open('{'); }
  void close_map() override { close('}'); }
  void open_list() override { open('['); }
  void close_list() override { close(']'); }
  void key(std::string_view name) override {
    separate();
    out_ += escaped(name) + ":";
    first_ = true;  // no comma before the value
  }
  void null() override { put("null"); }
  void flag(bool value) override { put(value ? "true" : "false"); }
  void integer(std::int64_t value) override { put(std::to_string(value)); }
  void text(std::string_view value) override { put(escaped(value)); }
  std::string take() override { return std::move(out_); }

 protected:
  void finite(double value) override { put(number_text(value)); }

 private:
  static std::string escaped(std::string_view text) {
    return nlohmann::json(text).dump(-1, ' ', false, nlohmann::json::error_handler_t::replace);
  }
  void separate() {
    if (!first_) out_ += ',';
    first_ = false;
  }
  void put(const std::string& value) {
    separate();
    out_ += value;
  }
  void open(char bracket) {
    separate();
    out_ += bracket;
    first_ = true;
  }
  void close(char bracket) {
    out_ += bracket;
    first_ = false;
  }

  std::string out_;
  bool first_ = true;
};

}  // namespace

std::unique_ptr<BytesWriter> make_json_writer() { return std::make_unique<JsonWriter>(); }

}  // namespace halfturn::wire
