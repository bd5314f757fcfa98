// SPDX-License-Identifier: Apache-2.0
#pragma once
#include "plugin/wire/reply.hpp"
#include "plugin/wire/writer.hpp"

/// The fields of replies, written into the map that is open (`proto` and `kind` stand in it already).
namespace halfturn::wire {

void write_fields(Writer& to, const Fitted& fitted);
void write_fields(Writer& to, const State& state);
void write_fields(Writer& to, const Live& live);
void write_fields(Writer& to, const Drift& drift);
void write_fields(Writer& to, const Error& error);
void write_fields(Writer& to, const Advised& advised);

void write_estimate(Writer& to, const Estimate& estimate);
void write_overlay(Writer& to, const Overlay& overlay);

/// The sites by columns, one array a field; null where a site lacks what another has.
void write_sites(Writer& to, const std::vector<SiteFit>& sites);

}  // namespace halfturn::wire
