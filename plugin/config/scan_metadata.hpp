// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <optional>
#include <vector>

#include "plugin/config/csv.hpp"
#include "plugin/config/reader.hpp"
#include "plugin/wire/request.hpp"

namespace halfturn::config {

/// What the lines above the header say: everything of a scan but its data.
struct Metadata {
  wire::Scan scan;
  std::optional<wire::ReadoutKind> references_kind;
  std::optional<double> shots, sigma, exposures;  // one number for all points
  Node node;                                      // all keys, with their places
};

/// Reads the metadata among the comments; remarks are passed over, what is wrong is noted in the reader.
Metadata read_metadata(Reader& reader, const std::vector<Comment>& comments);

}  // namespace halfturn::config
