// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <functional>
#include <string_view>

#include "plugin/wire/writer.hpp"

namespace halfturn::wire {

/// Writes a MessagePack value with a writer of any encoding. Where the value is a map, `extend` may write further fields at
/// its end. Returns whether the bytes were one whole value; what was written of others is of no use.
bool transcribe(std::string_view msgpack, Writer& to, const std::function<void(Writer&)>& extend = {});

}  // namespace halfturn::wire
