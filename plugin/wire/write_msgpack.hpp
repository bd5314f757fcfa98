// SPDX-License-Identifier: Apache-2.0
#pragma once
#include "plugin/wire/writer.hpp"

namespace halfturn::wire {
std::unique_ptr<BytesWriter> make_msgpack_writer();
}
