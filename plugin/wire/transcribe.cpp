// SPDX-License-Identifier: Apache-2.0
#include "plugin/wire/transcribe.hpp"

#include "plugin/wire/events.hpp"

namespace halfturn::wire {
namespace {

class Transcriber : public Events {
 public:
  Transcriber(Writer& to, const std::function<void(Writer&)>& extend) : to_(to), extend_(extend) {}

  bool null() override { return to_.null(), true; }
  bool flag(bool value) override { return to_.flag(value), true; }
  bool integer(std::int64_t value) override { return to_.integer(value), true; }
  bool number(double value) override { return to_.number(value), true; }
  bool text(std::string_view value) override { return to_.text(value), true; }
  bool time(Time value) override { return to_.time(value), true; }
  bool alien(std::string_view) override { return false; }
  bool open_map() override { return to_.open_map(), ++depth_ <= kDeepest; }
  bool key(std::string_view name) override { return to_.key(name), true; }
  bool close_map() override {
    if (--depth_ == 0 && extend_) extend_(to_);
    return to_.close_map(), true;
  }
  bool open_list() override { return to_.open_list(), ++depth_ <= kDeepest; }
  bool close_list() override { return --depth_, to_.close_list(), true; }

 private:
  static constexpr int kDeepest = 32;  // the deepest reply has 5 levels

  Writer& to_;
  const std::function<void(Writer&)>& extend_;
  int depth_ = 0;
};

}  // namespace

bool transcribe(std::string_view msgpack, Writer& to, const std::function<void(Writer&)>& extend) {
  Transcriber transcriber(to, extend);
  return read_msgpack(msgpack, transcriber).how == ReadEnd::How::complete;
}

}  // namespace halfturn::wire
