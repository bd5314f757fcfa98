// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <optional>

#include "plugin/config/configuration.hpp"
#include "plugin/config/reader.hpp"

/// The parts of a configuration, each read from its place. What is wrong is noted in the reader; the structure that comes
/// back is then not to be used.
namespace halfturn::config {

Sockets read_sockets(Reader& reader, const Place& at, bool insecure);
Drive read_drive(Reader& reader, const Place& at);
recalibrate::Pulse read_pulse(Reader& reader, const Place& at);
std::optional<atom::Transition> read_transition(Reader& reader, const Place& at);

}  // namespace halfturn::config
