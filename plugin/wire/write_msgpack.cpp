// SPDX-License-Identifier: Apache-2.0
#include "plugin/wire/write_msgpack.hpp"

#include <bit>
#include <msgpack.hpp>

namespace halfturn::wire {
namespace {

/// What msgpack-c's packer writes to.
struct Buffer {
  std::string bytes;
  void write(const char* data, std::size_t size) { bytes.append(data, size); }
};

class MsgpackWriter : public BytesWriter {
 public:
  void open_map() override { open(); }
  void close_map() override { close(true); }
  void open_list() override { open(); }
  void close_list() override { close(false); }
  void key(std::string_view name) override {
    put_text(name);
    ++containers_.back().members;
    after_key_ = true;
  }
  void null() override {
    member();
    packer_.pack_nil();
  }
  void flag(bool value) override {
    member();
    if (value) packer_.pack_true();
    else packer_.pack_false();
  }
  void integer(std::int64_t value) override {
    member();
    packer_.pack_int64(value);
  }
  void text(std::string_view value) override {
    member();
    put_text(value);
  }
  std::string take() override { return std::move(buffer_.bytes); }

 protected:
  void finite(double value) override {
    // msgpack-c's pack_double writes whole numbers as integers; here a number is a float whatever its value.
    member();
    const auto bits = std::bit_cast<std::uint64_t>(value);
    buffer_.bytes += '\xcb';
    for (int shift = 56; shift >= 0; shift -= 8) buffer_.bytes += static_cast<char>(bits >> shift & 0xff);
  }

 private:
  struct Container {
    std::size_t at;  // of its one-byte header, which grows when the container closes with many members
    std::size_t members = 0;
  };

  void put_text(std::string_view value) {
    packer_.pack_str(static_cast<std::uint32_t>(value.size()));
    packer_.pack_str_body(value.data(), static_cast<std::uint32_t>(value.size()));
  }
  void member() {
    if (!containers_.empty() && !after_key_) ++containers_.back().members;
    after_key_ = false;
  }
  void open() {
    member();
    containers_.push_back({buffer_.bytes.size()});
    buffer_.bytes += '\0';
  }
  void close(bool is_map) {
    const Container done = containers_.back();
    containers_.pop_back();
    Buffer header;
    msgpack::packer<Buffer> packer(header);
    if (is_map) packer.pack_map(static_cast<std::uint32_t>(done.members));
    else packer.pack_array(static_cast<std::uint32_t>(done.members));
    buffer_.bytes.replace(done.at, 1, header.bytes);
  }

  Buffer buffer_;
  msgpack::packer<Buffer> packer_{buffer_};
  std::vector<Container> containers_;
  bool after_key_ = false;
};

}  // namespace

std::unique_ptr<BytesWriter> make_msgpack_writer() { return std::make_unique<MsgpackWriter>(); }

}  // namespace halfturn::wire
